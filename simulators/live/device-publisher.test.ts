import { once } from 'node:events'
import { createServer, type AddressInfo, type Server, type Socket } from 'node:net'

import { Aedes } from 'aedes'
import { afterEach, expect, it } from 'vitest'

import { SenmlPack } from '#shared/contract/senml.ts'
import { seededRandom } from '#shared/domain/random.ts'

import { backoffMs, createDevicePublisher, type DevicePublisher } from './device-publisher.ts'

interface Heard {
  topic: string
  payload: string
  retain: boolean
}

/** A real broker that can be cut off and that can hold acknowledgements back. */
async function openBroker(port = 0) {
  const aedes = await Aedes.createBroker({ concurrency: 0 })
  const heard: Heard[] = []
  const sockets = new Set<Socket>()
  let holding = false
  aedes.authorizePublish = (_client, packet, done) => {
    heard.push({ topic: packet.topic, payload: String(packet.payload), retain: packet.retain })
    if (!holding || !packet.topic.endsWith('/readings')) done(null)
  }
  const server: Server = createServer((socket) => {
    sockets.add(socket)
    aedes.handle(socket)
  })
  server.listen(port, '127.0.0.1')
  await once(server, 'listening')
  const address = server.address()
  if (!isAddress(address)) throw new Error('no port')
  return {
    port: address.port,
    heard,
    hold: (on: boolean) => {
      holding = on
    },
    cut: () => {
      for (const socket of sockets) socket.destroy()
    },
    async close() {
      for (const socket of sockets) socket.destroy()
      await new Promise((resolve) => server.close(resolve))
      await new Promise<void>((resolve) => {
        aedes.close(resolve)
      })
    },
  }
}

const isAddress = (address: AddressInfo | string | null): address is AddressInfo =>
  address !== null && typeof address === 'object'

const open: { publisher?: DevicePublisher; broker?: Awaited<ReturnType<typeof openBroker>> } = {}
afterEach(async () => {
  await open.publisher?.stop()
  await open.broker?.close()
  delete open.publisher
  delete open.broker
})

function publish(port: number): DevicePublisher {
  const publisher = createDevicePublisher({
    url: `mqtt://127.0.0.1:${String(port)}`,
    credentials: { site: 'quarry-road', device: 'yard-box', username: 'u', secret: 's' },
    random: seededRandom('test'),
    health: () => [],
    onTrouble: () => undefined,
  })
  open.publisher = publisher
  return publisher
}

const report = (minute: number) => ({ atMs: minute * 60_000, values: [{ channel: 1, valueC: minute }] })
const values = (heard: readonly Heard[]) =>
  heard
    .filter(({ topic }) => topic === 'coalhand/quarry-road/yard-box/readings')
    .flatMap(({ payload }) => SenmlPack.parse(JSON.parse(payload)).map(({ v }) => v))

it('says online, retained, and sends each report once', async () => {
  const broker = (open.broker = await openBroker())
  const publisher = publish(broker.port)
  publisher.report(report(1))
  await expect.poll(() => values(broker.heard)).toEqual([1])
  publisher.report(report(2))
  await expect.poll(() => values(broker.heard)).toEqual([1, 2])
  await expect.poll(() => publisher.waiting).toBe(0)
  expect(broker.heard[0]).toEqual({
    topic: 'coalhand/quarry-road/yard-box/status',
    payload: 'online',
    retain: true,
  })
})

it('sends again, after coming back, what was not acknowledged, with what it read meanwhile', async () => {
  const broker = (open.broker = await openBroker())
  const publisher = publish(broker.port)
  broker.hold(true)
  publisher.report(report(1))
  await expect.poll(() => values(broker.heard)).toEqual([1])
  publisher.report(report(2))
  publisher.report(report(3))
  broker.hold(false)
  broker.cut()
  await expect.poll(() => values(broker.heard), { timeout: 5000 }).toEqual([1, 3, 1, 2])
  await expect.poll(() => publisher.waiting).toBe(0)
})

it('leaves offline behind when it drops, and says it when it is switched off', async () => {
  const broker = (open.broker = await openBroker())
  const publisher = publish(broker.port)
  await expect.poll(() => publisher.connected).toBe(true)
  const offline = () => broker.heard.filter(({ payload, retain }) => payload === 'offline' && retain).length
  broker.cut()
  await expect.poll(offline).toBe(1)
  await expect.poll(() => publisher.connected, { timeout: 5000 }).toBe(true)
  await publisher.stop()
  expect(offline()).toBe(2)
})

it('waits longer with each failure, up to a quarter of a minute', () => {
  const random = seededRandom('backoff')
  const waits = Array.from({ length: 12 }, (_, failures) => backoffMs(failures, random))
  expect(waits[0]).toBeLessThanOrEqual(500)
  expect(Math.max(...waits)).toBeLessThanOrEqual(15_000)
  expect(waits[11]).toBeGreaterThanOrEqual(7500)
  expect(backoffMs(100, random)).toBeLessThanOrEqual(15_000)
})
