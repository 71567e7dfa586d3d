import type { AddressInfo, Server } from 'node:net'

/**
 * Opens a server's port; 0 takes a free one.
 * @returns the port
 */
export function listen(server: Server, port: number, host: string): Promise<number> {
  return new Promise((resolve, reject) => {
    server.once('error', reject)
    server.listen(port, host, () => {
      server.off('error', reject)
      const address = server.address()
      resolve(isAddress(address) ? address.port : port)
    })
  })
}

function isAddress(address: AddressInfo | string | null): address is AddressInfo {
  return typeof address === 'object' && address !== null
}

/** An IPv4 address that came over an IPv6 socket is shown as what it is. */
export function plainAddress(address = ''): string {
  return address.replace(/^::ffff:(?=\d+\.)/, '')
}
