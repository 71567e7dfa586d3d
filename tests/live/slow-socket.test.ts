import { createServer } from 'node:http'
import { once } from 'node:events'
import { connect } from 'node:net'
import { pino } from 'pino'
import { afterAll, beforeAll, expect, test } from 'vitest'
import { WebSocket } from 'ws'
import { z } from 'zod'
import { closeCodes, livePath, ServerMessage } from '#shared/contract/live.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { dispatchUpgrades } from '../../server/http/upgrades.ts'
import { createLiveBus, type LiveBus } from '../../server/live/bus.ts'
import { createLiveHub, type LiveHub } from '../../server/live/hub.ts'
import { eventually } from '../broker/devices.ts'

/** A hub by itself, with quick limits, and more in each frame than a kitchen has. */
const http = createServer()
let bus: LiveBus
let hub: LiveHub
let port: number
beforeAll(async () => {
  bus = createLiveBus()
  hub = createLiveHub({
    bus,
    verifyTicket: () => ({ userId: 1, name: 'Somebody', rolesBySite: new Map() }),
    mayView: () => true,
    snapshotOf: (slug) =>
      Promise.resolve({
        site: { id: 1, slug, name: slug, timeZone: 'America/Chicago', elevationM: 0 },
        now: new Date(systemClock.now()).toISOString(),
        services: [],
        cookers: [],
        pieces: [],
        devices: [],
        latest: [],
        forecasts: [],
      }),
    clock: systemClock,
    log: pino({ level: 'silent' }),
    limits: { frameMs: 40, heartbeatMs: 1500, maxWaitingBytes: 512 * 1024, maxBehindMs: 400 },
  })
  dispatchUpgrades(http, { handlers: new Map([[livePath, hub.upgrade]]), allowedOrigins: [] })
  http.listen(0, '127.0.0.1')
  await once(http, 'listening')
  port = z.object({ port: z.number() }).parse(http.address()).port
})
afterAll(async () => {
  await hub.stop()
  http.closeAllConnections()
  http.close()
})

async function join(): Promise<{ socket: WebSocket; messages: ServerMessage[] }> {
  const socket = new WebSocket(`ws://127.0.0.1:${port}${livePath}`)
  const messages: ServerMessage[] = []
  socket.on('message', (data: Buffer) => messages.push(ServerMessage.parse(JSON.parse(data.toString()))))
  await once(socket, 'open')
  socket.send(JSON.stringify({ type: 'hello', ticket: 'any' }))
  socket.send(JSON.stringify({ type: 'subscribe', site: 'quarry-road' }))
  await eventually(
    () => messages,
    (all) => all.some(({ type }) => type === 'snapshot'),
  )
  return { socket, messages }
}

const bigFrame = () =>
  bus.publish('quarry-road', {
    readings: Array.from({ length: 4000 }, (_, index) => [index + 1, index, 100.123456]),
  })

test('a socket that stops reading is closed as too slow while its neighbour gets every frame', async () => {
  const slow = await join()
  const quick = await join()
  slow.socket.pause()
  const flood = setInterval(bigFrame, 40)
  // Kernel buffers take some megabytes first.
  await eventually(hub.connections, (count) => count === 1, 25_000)
  clearInterval(flood)
  const closed = once(slow.socket, 'close')
  slow.socket.resume()
  const code: unknown = (await closed)[0]
  expect([closeCodes.tooSlow, 1006]).toContain(code)
  const seqs = quick.messages.flatMap((message) => ('seq' in message ? [message.seq] : []))
  expect(seqs).toEqual(seqs.map((_, index) => (seqs[0] ?? 0) + index))
  expect(seqs.length).toBeGreaterThan(10)
  quick.socket.terminate()
})

test('a peer that no longer answers pings is given up', async () => {
  await eventually(hub.connections, (count) => count === 0)
  // A socket that speaks the opening handshake by hand and nothing after it.
  const mute = connect(port, '127.0.0.1')
  mute.write(
    [
      `GET ${livePath} HTTP/1.1`,
      `Host: 127.0.0.1:${port}`,
      'Upgrade: websocket',
      'Connection: Upgrade',
      'Sec-WebSocket-Key: dGhlIHNhbXBsZSBub25jZQ==',
      'Sec-WebSocket-Version: 13',
      '\r\n',
    ].join('\r\n'),
  )
  mute.on('error', () => undefined)
  mute.resume()
  await eventually(hub.connections, (count) => count === 1)
  await once(mute, 'close')
  await eventually(hub.connections, (count) => count === 0)
})
