import { once } from 'node:events'
import { WebSocket } from 'ws'
import { livePath, ServerMessage } from '#shared/contract/live.ts'
import { sessionEndpoints } from '#shared/contract/session.ts'
import type { Role } from '#shared/domain/permissions.ts'
import type { TestServer } from '../harness/server.ts'
import { eventually } from '../broker/devices.ts'

export interface Watcher {
  socket: WebSocket
  /** Every message so far, in order, checked against the contract. */
  messages: ServerMessage[]
  /** Waits for a message that fits. */
  until: (fits: (message: ServerMessage) => boolean, withinMs?: number) => Promise<ServerMessage>
  send: (message: unknown) => void
  close: () => void
}

/** A fresh ticket for the WebSocket. */
export async function ticketFor(server: TestServer, role: Role | 'stranger'): Promise<string> {
  const answer = await server.as(role).post(sessionEndpoints.liveTicket.path).expect(200)
  return sessionEndpoints.liveTicket.response.parse(answer.body).ticket
}

/** Opens a socket; nothing is said yet. */
export async function openSocket(server: TestServer, headers: Record<string, string> = {}): Promise<Watcher> {
  const socket = new WebSocket(server.url.replace('http', 'ws') + livePath, { headers })
  const messages: ServerMessage[] = []
  socket.on('message', (data: Buffer) => messages.push(ServerMessage.parse(JSON.parse(data.toString()))))
  await once(socket, 'open')
  return {
    socket,
    messages,
    until: async (fits, withinMs) => {
      const found = await eventually(
        () => messages.find(fits),
        (message) => message !== undefined,
        withinMs,
      )
      if (!found) throw new Error('No such message.')
      return found
    },
    send: (message) => socket.send(JSON.stringify(message)),
    close: () => socket.terminate(),
  }
}

/** Signs in and enters a site's room; the snapshot is there. */
export async function watchSite(
  server: TestServer,
  site = 'quarry-road',
  role: Role = 'crew',
): Promise<Watcher> {
  const watcher = await openSocket(server)
  watcher.send({ type: 'hello', ticket: await ticketFor(server, role) })
  await watcher.until(({ type }) => type === 'welcome')
  watcher.send({ type: 'subscribe', site })
  await watcher.until(({ type }) => type === 'snapshot')
  return watcher
}

/** Resolves with the code that the server closes a socket with. */
export async function closing(socket: WebSocket): Promise<number> {
  if (socket.readyState === WebSocket.CLOSED) throw new Error('It was closed before.')
  return new Promise((resolve) => socket.once('close', (code) => resolve(code)))
}
