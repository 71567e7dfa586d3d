import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest'
import { z } from 'zod'
import { deviceEndpoints } from '#shared/contract/device.ts'
import { systemClock } from '#shared/domain/clock.ts'
import type { HouseDevice } from '../../harness/house.ts'
import { startTestServer, type TestServer } from '../../harness/server.ts'
import { record, topicOf } from '../devices.ts'
import { ackPacket, connectPacket, publishPacket, subscribePacket } from './packets.ts'
import { idOf, message } from './bare-broker.ts'
import { openWire, type Wire } from './wire.ts'

let server: TestServer
let device: HouseDevice
let readings: string
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  device = server.house.own.device
  readings = topicOf(device)
})
afterAll(() => server.stop())
beforeEach(async () => {
  await server.db('readings').delete()
  await server.db('rejected_messages').delete()
  await server.db('rejection_counts').delete()
})

const credentials = () => ({ username: device.username, password: Buffer.from(device.secret) })

async function connect(options: Parameters<typeof connectPacket>[0] = {}): Promise<Wire> {
  const wire = openWire(server.mqttPort)
  wire.send(connectPacket({ ...credentials(), ...options }))
  expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
  return wire
}

async function storedValues(): Promise<number[]> {
  const rows: unknown = await server.db('readings').orderBy('at').orderBy('value').select('value')
  return z
    .array(z.object({ value: z.number() }))
    .parse(rows)
    .map(({ value }) => value)
}

async function rejected() {
  const answer = await server.as('engineer').get('/api/sites/quarry-road/rejected').expect(200)
  return deviceEndpoints.rejected.response.parse(answer.body).items
}

const pack = (celsius: number, atMs: number) => JSON.stringify([record(1, celsius, atMs)])
const hourAgo = () => systemClock.now() - 3_600_000

test.each([
  [1, 'puback'],
  [2, 'pubrec'],
] as const)(
  '[MQTT-4.3.2-2] [MQTT-4.3.3-2] at QoS %d the reading is in the database when %s comes',
  async (qos, answer) => {
    const wire = await connect()
    wire.send(publishPacket(readings, pack(61, hourAgo()), { qos, messageId: 1 }))
    expect(await wire.next()).toMatchObject({ cmd: answer, messageId: 1 })
    expect(await storedValues()).toEqual([61])
    await wire.cut()
  },
)

test('[MQTT-4.3.2-2] after the PUBACK the same packet identifier with DUP is a new message: another reading, another row', async () => {
  const wire = await connect()
  const from = hourAgo()
  wire.send(publishPacket(readings, pack(61, from), { qos: 1, messageId: 7 }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
  wire.send(publishPacket(readings, pack(62, from + 1000), { qos: 1, messageId: 7, dup: true }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
  expect(await storedValues()).toEqual([61, 62])
  await wire.cut()
})

test.each([1, 2] as const)(
  '[MQTT-4.4.0-1] a device that was cut off before its answer sends again: one row, at QoS %d too',
  async (qos) => {
    const reading = pack(63, hourAgo())
    for (let attempt = 0; attempt < 3; attempt++) {
      const first = await connect({ clientId: 'box', clean: false })
      first.send(publishPacket(readings, reading, { qos, messageId: 9, dup: attempt > 0 }))
      await first.cut()
    }
    const wire = await connect({ clientId: 'box', clean: false })
    wire.send(publishPacket(readings, reading, { qos, messageId: 9, dup: true }))
    expect(await wire.next()).toMatchObject({ cmd: qos === 1 ? 'puback' : 'pubrec', messageId: 9 })
    if (qos === 2) {
      wire.send(ackPacket('pubrel', 9))
      expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 9 })
    }
    expect(await storedValues()).toEqual([63])
    expect(await rejected()).toEqual([])
    await wire.cut()
  },
)

describe('two hundred messages in one segment', () => {
  const sound = (index: number) => index % 5 !== 0
  const messages = (from: number) =>
    Array.from({ length: 200 }, (_, index) =>
      publishPacket(readings, sound(index) ? pack(60 + index / 10, from + index * 1000) : 'no pack', {
        qos: 1,
        messageId: index + 1,
      }),
    )

  test('[4.6] are acknowledged once each, the stored ones in their order', async () => {
    const wire = await connect()
    wire.send(...messages(hourAgo()))
    const ids: number[] = []
    while (ids.length < 200) ids.push(idOf(await wire.next()))
    expect([...ids].sort((a, b) => a - b)).toEqual(Array.from({ length: 200 }, (_, index) => index + 1))
    const stored = ids.filter((id) => sound(id - 1))
    expect(stored).toEqual([...stored].sort((a, b) => a - b))
    expect(await storedValues()).toHaveLength(160)
    await wire.cut()
  })

  test('[MQTT-4.6.0-6] come to a subscriber, the stored ones in their order', async () => {
    const watcher = await connect({ clientId: 'watcher' })
    watcher.send(subscribePacket(1, [readings, 0]))
    expect(await watcher.next()).toMatchObject({ cmd: 'suback', granted: [0] })
    const wire = await connect({ clientId: 'box' })
    const sent = messages(hourAgo())
    wire.send(...sent)
    const got: string[] = []
    while (got.length < sent.length) got.push(message(await watcher.next()).payload)
    const payloads = sent.map(({ payload }) => payload.toString()).filter((_payload, index) => sound(index))
    expect(got.filter((payload) => payload !== 'no pack')).toEqual(payloads)
    await Promise.all([wire.cut(), watcher.cut()])
  })
})

describe('[MQTT-3.3.5-2] what is refused is acknowledged or closes the connection, and is on record either way', () => {
  test('a pack that cannot be stored is acknowledged', async () => {
    const wire = await connect()
    wire.send(publishPacket(readings, '{"no": "pack"}', { qos: 1, messageId: 1 }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(await rejected()).toMatchObject([{ reason: 'not-senml', topic: readings }])
    await wire.cut()
  })

  test('a foreign topic closes the connection', async () => {
    const foreign = topicOf(server.house.foreign.device, 'mill-yard')
    const wire = await connect()
    wire.send(publishPacket(foreign, pack(61, hourAgo()), { qos: 1, messageId: 1 }))
    expect(await wire.rest()).toEqual([])
    await expect.poll(rejected).toMatchObject([{ reason: 'foreign-topic', topic: foreign }])
    expect(await storedValues()).toEqual([])
  })

  test('a packet above 64 kB closes the connection at its header', async () => {
    const wire = await connect()
    wire.send(Buffer.from([0x32, 0xc0, 0x96, 0xb1, 0x02]))
    expect(await wire.rest()).toEqual([])
    await expect.poll(rejected).toMatchObject([{ reason: 'too-large' }])
  })
})

test.each([
  ['an unknown device', () => ({ ...credentials(), username: 'quarry-road.nobody' })],
  ['a wrong secret', () => ({ ...credentials(), password: Buffer.from('wrong') })],
  ['another device’s secret', () => ({ ...credentials(), username: server.house.foreign.device.username })],
])('[3.2.2.3] %s is answered with return code 4, then closed [MQTT-3.2.2-5]', async (_name, options) => {
  // The two devices of the test house must not have the same secret, or the last case would say nothing.
  expect(server.house.foreign.device.secret).not.toBe(device.secret)
  const wire = openWire(server.mqttPort)
  wire.send(connectPacket(options()))
  expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 4, sessionPresent: false }])
})

test('[MQTT-3.1.2-8] a will of `offline` and a line that is cut: the device is offline in the API', async () => {
  const status = readings.replace('readings', 'status')
  const connection = async () => {
    const answer = await server.as('manager').get('/api/sites/quarry-road/devices').expect(200)
    return deviceEndpoints.list.response.parse(answer.body).items.find(({ id }) => id === device.id)
      ?.connection
  }
  const wire = await connect({ will: { topic: status, payload: 'offline', qos: 1, retain: true } })
  wire.send(publishPacket(status, 'online', { qos: 1, messageId: 1, retain: true }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  await expect.poll(connection).toBe('online')
  await wire.cut()
  await expect.poll(connection).toBe('offline')
})
