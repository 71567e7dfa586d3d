import { connect, createServer, type Server, type Socket } from 'node:net'
import { z } from 'zod'

/** A way to a server that can be cut and mended, as when a database goes away and comes back. */
export interface CuttableProxy {
  port: number
  /** Breaks every connection and refuses new ones. */
  cut(): Promise<void>
  mend(): Promise<void>
}

/** Listens on a free port of loopback and passes everything on to another. Whoever made it cuts it in the end. */
export async function cuttableProxy(targetHost: string, targetPort: number): Promise<CuttableProxy> {
  const sockets = new Set<Socket>()
  const keep = (socket: Socket) => {
    sockets.add(socket)
    socket.on('error', () => undefined)
    socket.on('close', () => sockets.delete(socket))
    return socket
  }
  const server: Server = createServer((incoming) => {
    const outgoing = keep(connect(targetPort, targetHost))
    keep(incoming).pipe(outgoing).pipe(incoming)
  })
  const listen = (port: number) =>
    new Promise<void>((resolve, reject) => {
      server.once('error', reject)
      server.listen(port, '127.0.0.1', resolve)
    })
  await listen(0)
  const { port } = z.object({ port: z.number() }).parse(server.address())
  return {
    port,
    cut: async () => {
      const closed = new Promise((resolve) => server.close(resolve))
      for (const socket of sockets) socket.destroy()
      await closed
    },
    mend: () => listen(port),
  }
}
