import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { message, messagesBefore, startBareBroker, type BareBroker, type Box } from './bare-broker.ts'
import { disconnect, publishPacket, subscribePacket } from './packets.ts'
import type { Wire } from './wire.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

const will = (box: Box, options: { qos?: 0 | 1 | 2; retain?: boolean } = {}) => ({
  topic: box.status,
  payload: 'offline',
  qos: 1 as const,
  retain: false,
  ...options,
})

/** What a new subscriber is given at once. */
async function retained(box: Box): Promise<string[]> {
  const wire = await broker.connect(box, { clientId: 'reader' })
  wire.send(subscribePacket(1, [box.status, 1]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback' })
  const before = await messagesBefore(broker, box, wire)
  await wire.cut()
  return before.map((packet) => message(packet).payload)
}

describe('[MQTT-3.1.2-8] the will is published when the connection ends', () => {
  const endings: [string, (wire: Wire, box: Box) => Promise<unknown>][] = [
    ['because the line is cut', (wire) => wire.cut()],
    [
      'because the broker closes it for what is malformed',
      (wire) => {
        wire.send(Buffer.from([0xf0, 0]))
        return wire.rest()
      },
    ],
    [
      'because it published to a foreign topic',
      (wire) => {
        wire.send(publishPacket('coalhand/elsewhere/box/status', 'online'))
        return wire.rest()
      },
    ],
    [
      'because another connection took over [MQTT-3.1.4-2]',
      async (wire, box) => {
        await broker.connect(box, { clientId: 'willing' })
        await wire.rest()
      },
    ],
    ['because it was silent beyond its keep-alive [MQTT-3.1.2-24]', (wire) => wire.rest()],
  ]
  test.each(endings)('%s', async (_name, end) => {
    const box = broker.newBox()
    const watcher = await broker.watch(box, box.status, 1)
    const wire = await broker.connect(box, { clientId: 'willing', keepalive: 1, will: will(box) })
    await end(wire, box)
    expect(message(await watcher.next())).toMatchObject({ topic: box.status, payload: 'offline' })
    await watcher.cut()
  })
})

test('[MQTT-3.1.2-10] it is published once only', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box) })
  await wire.cut()
  expect(message(await watcher.next()).payload).toBe('offline')
  const next = await broker.connect(box, { clientId: 'willing' })
  await next.cut()
  expect(await messagesBefore(broker, box, watcher)).toEqual([])
  await watcher.cut()
})

test('[MQTT-3.14.4-3] after DISCONNECT it is not published [MQTT-3.1.2-10]', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box) })
  wire.send(disconnect)
  await wire.rest()
  expect(await messagesBefore(broker, box, watcher)).toEqual([])
  await watcher.cut()
})

test('[MQTT-3.14.1-1] a DISCONNECT with reserved bits set is none: the will is published', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box) })
  wire.send(Buffer.from([0xe2, 0]))
  await wire.rest()
  expect(message(await watcher.next()).payload).toBe('offline')
  await watcher.cut()
})

test('[MQTT-3.1.2-12] without one nothing is published', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const wire = await broker.connect(box, { clientId: 'unwilling' })
  await wire.cut()
  expect(await messagesBefore(broker, box, watcher)).toEqual([])
  await watcher.cut()
})

test.each([0, 1, 2] as const)('[MQTT-3.1.2-9] it is published at its QoS %d', async (qos) => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 2)
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box, { qos }) })
  await wire.cut()
  expect(message(await watcher.next())).toMatchObject({ payload: 'offline', qos })
  await watcher.cut()
})

test('[MQTT-3.1.2-17] with the retain flag it is kept for who subscribes later', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box, { retain: true }) })
  wire.send(publishPacket(box.status, 'online', { qos: 1, messageId: 1, retain: true }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  expect(await retained(box)).toEqual(['online'])
  await wire.cut()
  await expect.poll(() => retained(box)).toEqual(['offline'])
})

test('[MQTT-3.1.2-16] without it, what was kept stays', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const wire = await broker.connect(box, { clientId: 'willing', will: will(box) })
  wire.send(publishPacket(box.status, 'online', { qos: 1, messageId: 1, retain: true }))
  expect(message(await watcher.next()).payload).toBe('online')
  await wire.cut()
  expect(message(await watcher.next())).toMatchObject({ payload: 'offline', retain: false })
  expect(await retained(box)).toEqual(['online'])
  await watcher.cut()
})

test('a will of readings is stored like any reading', async () => {
  const box = broker.newBox()
  const last = { ...will(box), topic: box.readings, payload: 'the last reading' }
  const wire = await broker.connect(box, { clientId: 'willing', will: last })
  await wire.cut()
  await expect.poll(() => broker.stored(box)).toEqual(['the last reading'])
})

test('who was refused leaves no will behind', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  const foreign = { ...will(box), topic: broker.newBox().status }
  await expect(broker.connect(box, { clientId: 'willing', will: foreign })).rejects.toThrow()
  expect(await messagesBefore(broker, box, watcher)).toEqual([])
  await watcher.cut()
})
