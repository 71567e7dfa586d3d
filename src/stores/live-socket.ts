import { closeCodes, livePath, ServerMessage, type ClientMessage } from '@/shared/contract/live.ts'
import type { Random } from '@/shared/domain/random.ts'

export interface LiveSocketOptions {
  /** Fetches a ticket; throws `SignedOut` when nobody is signed in any more. */
  getTicket: () => Promise<string>
  onOpen: () => void
  onMessage: (message: ServerMessage) => void
  onLost: () => void
  /** Spreads the clients of a house over time when its server comes back. */
  random: Random
}

export interface LiveSocket {
  send(message: ClientMessage): void
  close(): void
}

const firstWaitMs = 500
const longestWaitMs = 15_000
/** Silence after which the line is tried, and after which it is given up. Devices speak every few seconds. */
const quietMs = 40_000
const answerMs = 10_000

/**
 * Keeps a WebSocket to the server open until it is closed: connects with a ticket, says hello, and after a loss comes
 * back after an exponential wait with full jitter. A line that is silent for long is asked for a sign of life.
 */
export function openLiveSocket(options: LiveSocketOptions & { probe: () => void }): LiveSocket {
  let socket: WebSocket | undefined
  let closed = false
  let tries = 0
  let retry: ReturnType<typeof setTimeout> | undefined
  let quiet: ReturnType<typeof setTimeout> | undefined

  const hurry = () => {
    if (retry === undefined) return
    clearTimeout(retry)
    void connect()
  }
  window.addEventListener('online', hurry)
  void connect()

  async function connect(): Promise<void> {
    retry = undefined
    let ticket: string
    try {
      ticket = await options.getTicket()
    } catch {
      lost()
      return
    }
    if (isClosed()) return
    const opened = new WebSocket(addressOf(livePath))
    socket = opened
    opened.addEventListener('open', () => {
      opened.send(JSON.stringify({ type: 'hello', ticket } satisfies ClientMessage))
    })
    opened.addEventListener('message', ({ data }) => {
      listen()
      const message = ServerMessage.safeParse(parse(data))
      if (!message.success) return
      if (message.data.type === 'welcome') {
        tries = 0
        options.onOpen()
      }
      options.onMessage(message.data)
    })
    opened.addEventListener('close', ({ code }) => {
      if (socket !== opened) return
      socket = undefined
      // A ticket that came too late is no loss to wait for.
      if (code === closeCodes.notSignedIn && tries === 0) tries = 1
      lost()
    })
  }

  function listen(): void {
    clearTimeout(quiet)
    quiet = setTimeout(() => {
      options.probe()
      quiet = setTimeout(() => socket?.close(), answerMs)
    }, quietMs)
  }

  function lost(): void {
    clearTimeout(quiet)
    if (isClosed()) return
    options.onLost()
    const ceiling = Math.min(longestWaitMs, firstWaitMs * 2 ** tries)
    tries++
    retry = setTimeout(() => void connect(), options.random.uniform() * ceiling)
  }

  /** Asked after each wait, because the page may have been left meanwhile. */
  function isClosed(): boolean {
    return closed
  }

  return {
    send: (message) => {
      if (socket?.readyState === WebSocket.OPEN) socket.send(JSON.stringify(message))
    },
    close: () => {
      closed = true
      clearTimeout(retry)
      clearTimeout(quiet)
      window.removeEventListener('online', hurry)
      socket?.close()
    },
  }
}

function addressOf(path: string): string {
  const url = new URL(path, window.location.href)
  url.protocol = url.protocol === 'https:' ? 'wss:' : 'ws:'
  return url.href
}

function parse(data: unknown): unknown {
  try {
    return typeof data === 'string' ? JSON.parse(data) : undefined
  } catch {
    return undefined
  }
}
