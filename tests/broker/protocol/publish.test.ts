import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { message, startBareBroker, type BareBroker } from './bare-broker.ts'
import { ackPacket, pingRequest, publishPacket, rawPacket, rawPublish, field, number16 } from './packets.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

describe('QoS 0', () => {
  test('[MQTT-3.3.4-1] is stored and not answered', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.readings, 'at most once'))
    wire.send(publishPacket(box.readings, 'at least once', { qos: 1, messageId: 1 }))
    // The first packet to come back is the answer to the second.
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(broker.stored(box)).toEqual(['at most once', 'at least once'])
    await wire.cut()
  })
})

describe('QoS 1', () => {
  test('[MQTT-2.3.1-6] is answered with a PUBACK of its packet identifier [MQTT-4.3.2-2]', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    for (const messageId of [1, 255, 256, 65_535]) {
      wire.send(publishPacket(box.readings, '[]', { qos: 1, messageId }))
      expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId })
    }
    expect(wire.bytes().subarray(4)).toEqual(
      Buffer.from([0x40, 2, 0, 1, 0x40, 2, 0, 255, 0x40, 2, 1, 0, 0x40, 2, 255, 255]),
    )
    await wire.cut()
  })

  test('[MQTT-4.3.2-2] is answered only once it is stored', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    const release = broker.holdStore()
    wire.send(publishPacket(box.readings, '[]', { qos: 1, messageId: 1 }))
    await expect.poll(() => broker.stored(box)).toHaveLength(1)
    // A ping is answered meanwhile: the connection is not dead, the store is slow.
    wire.send(pingRequest)
    expect(await wire.next()).toMatchObject({ cmd: 'pingresp' })
    expect(wire.waiting()).toBe(0)
    release()
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    await wire.cut()
  })

  test('[MQTT-4.8.0-2] that cannot be stored closes the connection unanswered, so that it comes again', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    const release = broker.holdStore()
    wire.send(publishPacket(box.readings, 'first try', { qos: 1, messageId: 1 }))
    await expect.poll(() => broker.stored(box)).toHaveLength(1)
    release(false)
    expect(await wire.rest()).toEqual([])
    const again = await broker.connect(box)
    again.send(publishPacket(box.readings, 'second try', { qos: 1, messageId: 1, dup: true }))
    expect(await again.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(broker.stored(box)).toEqual(['first try', 'second try'])
    await again.cut()
  })

  test.each([false, true])(
    '[MQTT-4.3.2-2] after the PUBACK the same packet identifier is a new message, with DUP %s too',
    async (dup) => {
      const box = broker.newBox()
      const wire = await broker.connect(box)
      wire.send(publishPacket(box.readings, 'one', { qos: 1, messageId: 7 }))
      expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
      wire.send(publishPacket(box.readings, 'two', { qos: 1, messageId: 7, dup }))
      expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
      expect(broker.stored(box)).toEqual(['one', 'two'])
      await wire.cut()
    },
  )
})

describe('QoS 2', () => {
  test('[MQTT-4.3.3-2] is PUBREC once stored, then PUBREL and PUBCOMP', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    const release = broker.holdStore()
    wire.send(publishPacket(box.readings, 'exactly once', { qos: 2, messageId: 9 }))
    await expect.poll(() => broker.stored(box)).toHaveLength(1)
    expect(wire.waiting()).toBe(0)
    release()
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
    wire.send(ackPacket('pubrel', 9))
    expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 9 })
    expect(broker.stored(box)).toEqual(['exactly once'])
    await wire.cut()
  })

  test('[MQTT-4.3.3-2] repeated before PUBREL it is acknowledged and reaches a subscriber once', async () => {
    const box = broker.newBox()
    const watcher = await broker.watch(box, box.status, 1)
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.status, 'online', { qos: 2, messageId: 9 }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
    wire.send(publishPacket(box.status, 'online', { qos: 2, messageId: 9, dup: true }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
    wire.send(ackPacket('pubrel', 9))
    expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 9 })
    wire.send(publishPacket(box.status, 'offline', { qos: 2, messageId: 9 }))
    expect(message(await watcher.next()).payload).toBe('online')
    expect(message(await watcher.next()).payload).toBe('offline')
    await Promise.all([wire.cut(), watcher.cut()])
  })

  test('[MQTT-4.3.3-2] after PUBCOMP the same packet identifier is a new message', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    for (const payload of ['one', 'two']) {
      wire.send(publishPacket(box.readings, payload, { qos: 2, messageId: 9 }))
      expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
      wire.send(ackPacket('pubrel', 9))
      expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 9 })
    }
    expect(broker.stored(box)).toEqual(['one', 'two'])
    await wire.cut()
  })

  test('[MQTT-4.3.3-2] a PUBREL that belongs to nothing is answered all the same', async () => {
    const wire = await broker.connect(broker.newBox())
    wire.send(ackPacket('pubrel', 77))
    expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 77 })
    await wire.cut()
  })
})

test('at QoS 2 twenty messages may be open; one more closes the connection, and none of them is lost', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  for (let messageId = 1; messageId <= 20; messageId++) {
    wire.send(publishPacket(box.readings, String(messageId), { qos: 2, messageId }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId })
  }
  wire.send(publishPacket(box.readings, '21', { qos: 2, messageId: 21 }))
  expect(await wire.rest()).toEqual([])
  expect(broker.stored(box).slice(0, 20)).toEqual(Array.from({ length: 20 }, (_, index) => String(index + 1)))
})

test('[MQTT-3.3.1-4] both QoS bits set closes the connection', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(rawPacket(0x36, field(box.readings), number16(1), Buffer.from('[]')))
  expect(await wire.rest()).toEqual([])
  expect(broker.stored(box)).toEqual([])
})

test('[MQTT-3.3.1-2] DUP at QoS 0 is a device’s fault that changes nothing', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(rawPacket(0x38, field(box.readings), Buffer.from('with dup')))
  wire.send(publishPacket(box.readings, 'next', { qos: 1, messageId: 1 }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  expect(broker.stored(box)).toEqual(['with dup', 'next'])
  await wire.cut()
})

describe('[MQTT-3.3.2-2] a topic with a wildcard closes the connection [MQTT-4.7.1-1]', () => {
  test.each(['coalhand/yard/+/readings', 'coalhand/yard/#', '#', '+'])('%s', async (topic) => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(rawPublish(topic, 1))
    expect(await wire.rest()).toEqual([])
    expect(broker.stored(box)).toEqual([])
  })
})

test('[MQTT-4.7.3-1] an empty topic closes the connection', async () => {
  const wire = await broker.connect(broker.newBox())
  wire.send(rawPublish('', 1))
  expect(await wire.rest()).toEqual([])
})

describe('[MQTT-3.3.5-2] what a device may not publish closes its connection unanswered, and is on record', () => {
  const topics: [string, () => string][] = [
    ['another device’s readings', () => broker.newBox().readings],
    ['another leaf of its own', () => 'coalhand/yard/box-1/commands'],
    ['the broker’s own', () => '$SYS/broker/clients'],
    [
      'its own with a slash more: no name is made another’s [MQTT-4.7.3-4]',
      () => 'coalhand/yard/box-1/readings/',
    ],
    ['its own in capitals [MQTT-4.7.3-4]', () => 'Coalhand/yard/box-1/readings'],
  ]
  test.each(topics)('%s', async (_name, topicOf) => {
    const box = broker.newBox()
    const topic = topicOf()
    for (const qos of [0, 1, 2] as const) {
      const wire = await broker.connect(box)
      wire.send(publishPacket(topic, 'x', qos > 0 ? { qos, messageId: 1 } : { qos }))
      expect(await wire.rest()).toEqual([])
    }
    expect(broker.stored(box)).toEqual([])
    expect(broker.refusals(box).map(({ reason }) => reason)).toEqual(
      Array.from({ length: 3 }, () => 'foreign-topic'),
    )
  })
})

test('[4.7] a topic of more than a hundred levels closes the connection', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(publishPacket(`${box.readings}${'/x'.repeat(100)}`, 'x', { qos: 1, messageId: 1 }))
  expect(await wire.rest()).toEqual([])
  expect(broker.stored(box)).toEqual([])
})

test('[3.3.3] a payload may be empty, and any bytes', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(
    publishPacket(box.readings, '', { qos: 1, messageId: 1 }),
    publishPacket(box.readings, Buffer.from([0, 1, 0xed, 0xa0, 0x80]), { qos: 1, messageId: 2 }),
  )
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 2 })
  await wire.cut()
})

test('an acknowledgement that belongs to nothing is passed over', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(ackPacket('puback', 5), ackPacket('pubcomp', 6))
  wire.send(publishPacket(box.readings, 'after it', { qos: 1, messageId: 1 }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
  await wire.cut()
})
