import type { IncomingMessage, Server } from 'node:http'
import type { Duplex } from 'node:stream'
import { plainAddress } from '../../broker/listen.ts'

export type UpgradeHandler = (request: IncomingMessage, socket: Duplex, head: Buffer) => void

export interface UpgradeOptions {
  /** Who answers, by path. */
  handlers: ReadonlyMap<string, UpgradeHandler>
  /** Pages of these origins may connect; those of the server's own address always may. */
  allowedOrigins: readonly string[]
}

/**
 * Gives each request for another protocol to whom it is for; a path that nobody has is answered with 404, a page of
 * another origin with 403. Only browsers name an origin: devices are let through.
 * @returns ends it
 */
export function dispatchUpgrades(
  httpServer: Server,
  { handlers, allowedOrigins }: UpgradeOptions,
): () => void {
  const dispatch: UpgradeHandler = (request, socket, head) => {
    const path = request.url?.split('?')[0] ?? ''
    const handler = handlers.get(path)
    if (!handler) turnAway(socket, '404 Not Found')
    else if (mayConnect(request, allowedOrigins)) handler(request, socket, head)
    else turnAway(socket, '403 Forbidden')
  }
  httpServer.on('upgrade', dispatch)
  return () => httpServer.off('upgrade', dispatch)
}

/**
 * Where a request came from, with that many reverse proxies before the server: each has added at the end of
 * `X-Forwarded-For` whom it heard; what stands before that anybody may have written.
 */
export function clientAddress({ headers, socket }: IncomingMessage, proxies: number): string {
  const forwarded = [headers['x-forwarded-for'] ?? []].flat().flatMap((line) => line.split(','))
  const way = [...forwarded.map((address) => address.trim()), socket.remoteAddress ?? '']
  return plainAddress(way[Math.max(0, way.length - 1 - proxies)])
}

/** A page of another origin must not open sockets with what a visitor's browser can reach (RFC 6455, 10.2). */
function mayConnect({ headers }: IncomingMessage, allowedOrigins: readonly string[]): boolean {
  const { origin, host } = headers
  if (origin === undefined || allowedOrigins.includes(origin)) return true
  return URL.canParse(origin) && new URL(origin).host === host
}

/** Answers an upgrade request with a status of HTTP instead. */
export function turnAway(socket: Duplex, status: string): void {
  socket.on('error', () => undefined)
  socket.end(`HTTP/1.1 ${status}\r\nConnection: close\r\nContent-Length: 0\r\n\r\n`)
}
