import { IncomingMessage } from 'node:http'
import { Socket } from 'node:net'
import { describe, expect, test } from 'vitest'
import { clientAddress } from './upgrades.ts'

function requestFrom(remoteAddress: string, forwarded?: string): IncomingMessage {
  const socket = new Socket()
  Object.defineProperty(socket, 'remoteAddress', { value: remoteAddress })
  const request = new IncomingMessage(socket)
  if (forwarded !== undefined) request.headers['x-forwarded-for'] = forwarded
  return request
}

describe('clientAddress', () => {
  test.each([
    ['without a proxy, what a client claims counts for nothing', '192.0.2.9', '198.51.100.1', 0, '192.0.2.9'],
    ['one proxy', '10.0.0.1', '198.51.100.1', 1, '198.51.100.1'],
    ['one proxy, and a client that claims more', '10.0.0.1', '203.0.113.7, 198.51.100.1', 1, '198.51.100.1'],
    ['two proxies', '10.0.0.1', '198.51.100.1, 10.0.0.2', 2, '198.51.100.1'],
    ['more proxies than have written', '10.0.0.1', '198.51.100.1', 3, '198.51.100.1'],
    ['a proxy that writes nothing', '10.0.0.1', undefined, 1, '10.0.0.1'],
    ['IPv4 over IPv6', '::ffff:192.0.2.9', undefined, 0, '192.0.2.9'],
    ['IPv6', '2001:db8::1', undefined, 0, '2001:db8::1'],
  ])('%s', (_name, remote, forwarded, proxies, expected) => {
    expect(clientAddress(requestFrom(remote, forwarded), proxies)).toBe(expected)
  })
})
