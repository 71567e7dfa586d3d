import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { idOf, message, messagesBefore, startBareBroker, type BareBroker } from './bare-broker.ts'
import { ackPacket, publishPacket, subscribePacket, unsubscribePacket } from './packets.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

describe('[MQTT-4.6.0-6] a subscriber gets messages of a topic in the order in which the device sent them', () => {
  test.each([
    [0, true],
    [1, true],
    [1, false],
    [2, true],
  ] as const)('QoS %d, clean session %s', async (qos, clean) => {
    const box = broker.newBox()
    const watcher = await broker.connect(box, { clientId: 'watcher', clean })
    watcher.send(subscribePacket(1, [box.readings, qos]))
    expect(await watcher.next()).toMatchObject({ cmd: 'suback', granted: [qos] })
    const wire = await broker.connect(box)
    // QoS 2 has a bound on what may be under way.
    const sent = Array.from({ length: qos === 2 ? 15 : 300 }, (_, index) => String(index))
    wire.send(
      ...sent.map((payload, index) =>
        publishPacket(box.readings, payload, qos > 0 ? { qos, messageId: index + 1 } : {}),
      ),
    )
    const got: string[] = []
    while (got.length < sent.length) {
      const packet = await watcher.next()
      got.push(message(packet).payload)
      if (qos === 1) watcher.send(ackPacket('puback', idOf(packet)))
    }
    expect(got).toEqual(sent)
    await Promise.all([wire.cut(), watcher.cut()])
  })
})

test('[MQTT-4.6.0-6] and all are acknowledged, also where some of them are retained, and a subscription comes in between', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  const send = (from: number, to: number) =>
    wire.send(
      ...Array.from({ length: to - from }, (_, index) =>
        publishPacket(box.readings, String(from + index), {
          qos: 1,
          messageId: from + index,
          retain: (from + index) % 3 === 0,
        }),
      ),
    )
  send(1, 101)
  for (let count = 0; count < 100; count++) await wire.next()
  const watcher = await broker.watch(box, box.readings, 1)
  send(101, 201)
  const ids: number[] = []
  const got: string[] = []
  for (let count = 0; count < 100; count++) {
    ids.push(idOf(await wire.next()))
  }
  while (got.length < 100) {
    const { payload, retain } = message(await watcher.next())
    // What was kept from before may come first.
    if (!retain) got.push(payload)
  }
  expect(got).toEqual(Array.from({ length: 100 }, (_, index) => String(101 + index)))
  expect(new Set(ids).size).toBe(100)
  await Promise.all([wire.cut(), watcher.cut()])
})

test('[MQTT-2.3.1-4] messages under way to a subscriber have identifiers of their own', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.readings, 1)
  const wire = await broker.connect(box)
  wire.send(
    ...Array.from({ length: 100 }, (_, index) =>
      publishPacket(box.readings, String(index), { qos: 1, messageId: index + 1 }),
    ),
  )
  const ids = new Set<number>()
  for (let count = 0; count < 100; count++) ids.add(idOf(await watcher.next()))
  expect(ids.size).toBe(100)
  expect(ids.has(0)).toBe(false)
  await Promise.all([wire.cut(), watcher.cut()])
})

test('[MQTT-4.3.3-1] at QoS 2 a subscriber’s PUBREC is answered with PUBREL', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 2)
  const wire = await broker.connect(box)
  wire.send(publishPacket(box.status, 'online', { qos: 2, messageId: 1 }))
  const packet = await watcher.next()
  expect(message(packet)).toMatchObject({ payload: 'online', qos: 2, dup: false })
  watcher.send(ackPacket('pubrec', idOf(packet)))
  expect(await watcher.next()).toMatchObject({ cmd: 'pubrel', messageId: idOf(packet) })
  watcher.send(ackPacket('pubcomp', idOf(packet)))
  expect(await messagesBefore(broker, box, watcher)).toEqual([])
  await Promise.all([wire.cut(), watcher.cut()])
})

test('[MQTT-4.5.0-1] a device that subscribes to what it publishes gets it too', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(subscribePacket(1, [box.status, 0]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback' })
  wire.send(publishPacket(box.status, 'online'))
  expect(message(await wire.next())).toMatchObject({ payload: 'online', qos: 0 })
  await wire.cut()
})

test('a reading comes to a subscriber only once it is stored', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.readings, 1)
  const wire = await broker.connect(box)
  const release = broker.holdStore()
  wire.send(publishPacket(box.readings, 'stored', { qos: 1, messageId: 1 }))
  await expect.poll(() => broker.stored(box)).toHaveLength(1)
  expect(await messagesOfReadings()).toBe(0)
  release()
  expect(message(await watcher.next()).payload).toBe('stored')
  await Promise.all([wire.cut(), watcher.cut()])

  /** Something that goes all the way and back says that nothing else is on its way. */
  async function messagesOfReadings() {
    watcher.send(unsubscribePacket(3, box.status))
    expect(await watcher.next()).toMatchObject({ cmd: 'unsuback', messageId: 3 })
    return watcher.waiting()
  }
})

test('[MQTT-3.10.4-3] what was under way when a subscription ended can still be acknowledged', async () => {
  const box = broker.newBox()
  const watcher = await broker.connect(box, { clientId: 'kept', clean: false })
  watcher.send(subscribePacket(1, [box.status, 1]))
  expect(await watcher.next()).toMatchObject({ cmd: 'suback' })
  const wire = await broker.connect(box)
  wire.send(publishPacket(box.status, 'online', { qos: 1, messageId: 1 }))
  const packet = await watcher.next()
  watcher.send(unsubscribePacket(2, box.status))
  expect(await watcher.next()).toMatchObject({ cmd: 'unsuback' })
  await watcher.cut()
  // Not acknowledged, so it comes again although the subscription is gone.
  const again = await broker.connect(box, { clientId: 'kept', clean: false })
  const repeated = await again.next()
  expect(message(repeated).payload).toBe('online')
  expect(idOf(repeated)).toBe(idOf(packet))
  await Promise.all([wire.cut(), again.cut()])
})
