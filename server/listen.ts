import type { Server as HttpServer } from 'node:http'
import type { Server } from 'node:net'
import { z } from 'zod'

/** A port that another program holds, in words for whoever starts the server. */
export class PortTaken extends Error {
  constructor(
    readonly port: number,
    what: string,
    setting: string,
  ) {
    super(
      `Port ${port}, wanted for ${what}, is in use. Stop the program that holds it, or set ${setting} to another.`,
    )
    this.name = 'PortTaken'
  }
}

/**
 * Opens a server's port; 0 takes a free one.
 * @returns the port
 * @throws PortTaken
 */
export function listen(server: Server, { host, port }: { host: string; port: number }): Promise<number> {
  return new Promise((resolve, reject) => {
    server.once('error', (error) => reject(asPortTaken(error, port, 'pages and API', 'PORT')))
    server.listen(port, host, () => resolve(Address.parse(server.address()).port))
  })
}

/** The error that tells of a port in use as one that says what to do; any other as it is. */
export function asPortTaken(error: Error, port: number, what: string, setting: string): Error {
  return InUse.safeParse(error).success ? new PortTaken(port, what, setting) : error
}

const Address = z.object({ port: z.number() })
const InUse = z.object({ code: z.literal('EADDRINUSE') })

/**
 * Closes an HTTP server: takes no new request, answers those under way, and breaks off what is left at the deadline.
 * @param deadlineMs from now, in milliseconds
 */
export async function closeHttp(server: HttpServer, deadlineMs: number): Promise<void> {
  const hurry = setTimeout(() => server.closeAllConnections(), deadlineMs)
  // A connection that falls idle after the closing began would be kept for the next request, which nobody takes.
  const tidy = setInterval(() => server.closeIdleConnections(), 50)
  await new Promise<void>((resolve) => server.close(() => resolve()))
  clearTimeout(hurry)
  clearInterval(tidy)
}
