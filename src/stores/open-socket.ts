import { livePath } from '@/shared/contract/live.ts'
import type { Socket } from './live-connection.ts'

/** Opens a WebSocket to the server that the page came from. */
export function openSocket(): Socket {
  const address = new URL(livePath, window.location.href)
  address.protocol = address.protocol === 'https:' ? 'wss:' : 'ws:'
  const socket = new WebSocket(address)
  const wrapped: Socket = {
    send: (text) => socket.send(text),
    close: () => socket.close(),
    onopen: null,
    onmessage: null,
    onclose: null,
  }
  socket.onopen = () => wrapped.onopen?.()
  socket.onmessage = (event: MessageEvent<unknown>) => wrapped.onmessage?.(event)
  socket.onclose = () => wrapped.onclose?.()
  return wrapped
}
