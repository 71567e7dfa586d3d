import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import {
  credentials,
  message,
  messagesBefore,
  startBareBroker,
  type BareBroker,
  type Box,
} from './bare-broker.ts'
import {
  connectPacket,
  field,
  number16,
  publishPacket,
  rawPacket,
  subscribePacket,
  unsubscribePacket,
} from './packets.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

async function publish(box: Box, topic: string, payload: string, qos: 0 | 1 | 2 = 1): Promise<void> {
  const wire = await broker.connect(box, { clientId: 'publisher' })
  wire.send(publishPacket(topic, payload, qos > 0 ? { qos, messageId: 1 } : {}))
  if (qos > 0) await wire.next()
  else {
    wire.send(publishPacket(box.readings, '', { qos: 1, messageId: 2 }))
    await wire.next()
  }
  await wire.cut()
}

describe('SUBSCRIBE', () => {
  test('[MQTT-3.8.4-1] is answered with a SUBACK of its packet identifier [MQTT-3.8.4-2]', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    for (const messageId of [1, 300, 65_535]) {
      wire.send(subscribePacket(messageId, [box.status, 0]))
      expect(await wire.next()).toMatchObject({ cmd: 'suback', messageId })
    }
    await wire.cut()
  })

  test('[MQTT-3.9.3-1] has a return code for each filter, in their order [MQTT-3.8.4-5] [MQTT-3.9.3-2]', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(subscribePacket(1, [box.readings, 2], ['#', 1], [box.status, 0], [box.all, 1], ['x', 0]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [2, 128, 0, 1, 128] })
    await wire.cut()
  })

  test.each([0, 1, 2] as const)('[MQTT-3.8.4-5] grants QoS %d as it is asked for', async (qos) => {
    const box = broker.newBox()
    const watcher = await broker.watch(box, box.all, qos)
    await watcher.cut()
  })

  test('(differs) [MQTT-3.8.4-5] a filter that comes twice has one return code, of its last QoS', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(subscribePacket(1, [box.status, 0], [box.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [1] })
    await wire.cut()
  })

  test('(differs) [MQTT-2.3.1-1] under packet identifier 0 is answered', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(rawPacket(0x82, number16(0), field(box.status), Buffer.from([1])))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', messageId: 0, granted: [1] })
    await wire.cut()
  })

  test('[MQTT-3.8.3-3] without a filter closes the connection', async () => {
    const wire = await broker.connect(broker.newBox())
    wire.send(rawPacket(0x82, number16(1)))
    expect(await wire.rest()).toEqual([])
  })

  describe('[MQTT-3-8.3-4] with a QoS that is none, or reserved bits set, closes the connection', () => {
    test.each([3, 4, 0x80, 0xfd])('%d', async (qosByte) => {
      const box = broker.newBox()
      const wire = await broker.connect(box)
      wire.send(rawPacket(0x82, number16(1), field(box.status), Buffer.from([qosByte])))
      expect(await wire.rest()).toEqual([])
    })
  })

  test('[2.2.3] cut short, without the QoS of its filter, closes the connection', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(rawPacket(0x82, number16(1), field(box.status)))
    expect(await wire.rest()).toEqual([])
  })

  describe('[MQTT-4.7.1-2] with a wildcard where none may be closes the connection [MQTT-4.7.1-3]', () => {
    test.each(['coalhand/yard#', 'coalhand/#/status', 'coalhand/yard+/status', 'coalhand/+yard/status'])(
      '%s',
      async (filter) => {
        const wire = await broker.connect(broker.newBox())
        wire.send(subscribePacket(1, [filter, 0]))
        expect(await wire.rest()).toEqual([])
      },
    )
  })

  test('[MQTT-4.7.3-1] with an empty filter closes the connection', async () => {
    const wire = await broker.connect(broker.newBox())
    wire.send(rawPacket(0x82, number16(1), field(''), Buffer.from([0])))
    expect(await wire.rest()).toEqual([])
  })
})

describe('a device reads nothing but its own: 0x80 for any other filter [MQTT-3.8.4-5]', () => {
  const others: [string, (other: Box) => string][] = [
    ['everything', () => '#'],
    ['everything of a house', () => 'coalhand/yard/#'],
    ['every device', () => 'coalhand/yard/+/readings'],
    ['every house', () => 'coalhand/+/box-1/readings'],
    ['one level of wildcards', () => '+/+/+/+'],
    ['another device', ({ readings }) => readings],
    ['all of another device', ({ all }) => all],
    ['the broker’s own [MQTT-4.7.2-1]', () => '$SYS/#'],
    ['the broker’s own by wildcard [MQTT-4.7.2-1]', () => '+/broker/#'],
    ['a shared subscription', ({ readings }) => `$share/group/${readings}`],
  ]
  test.each(others)('%s', async (_name, filterOf) => {
    const other = broker.newBox()
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(subscribePacket(1, [filterOf(other), 1], [box.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [128, 1] })
    await publish(other, other.readings, 'not yours')
    await publish(other, other.status, 'not yours')
    expect(await messagesBefore(broker, box, wire)).toEqual([])
    await wire.cut()
  })
})

describe('[4.7] filters of its own', () => {
  const filters: [string, (box: Box) => string][] = [
    ['a topic', ({ status }) => status],
    ['# below its name', ({ all }) => all],
    ['+ below its name', ({ all }) => all.replace('#', '+')],
  ]
  test.each(filters)('%s: matches', async (_name, filterOf) => {
    const box = broker.newBox()
    const wire = await broker.watch(box, filterOf(box), 1)
    await publish(box, box.status, 'online')
    expect(message(await wire.next())).toMatchObject({ topic: box.status, payload: 'online' })
    await wire.cut()
  })

  test('[MQTT-3.3.2-3] a topic filter matches that topic only', async () => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.status, 1)
    await publish(box, box.readings, 'not subscribed')
    expect(await messagesBefore(broker, box, wire)).toEqual([])
    await wire.cut()
  })
})

describe('[MQTT-3.8.4-6] a message comes at the lower of its QoS and the granted one', () => {
  const all = [0, 1, 2] as const
  const cases = all.flatMap((granted) => all.map((published) => ({ granted, published })))
  test.each(cases)('granted $granted, published $published', async ({ granted, published }) => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.status, granted)
    await publish(box, box.status, 'online', published)
    expect(message(await wire.next())).toMatchObject({ payload: 'online', qos: Math.min(granted, published) })
    await wire.cut()
  })

  const plain = cases.filter(({ granted, published }) => granted !== 1 || published !== 2)
  test.each(plain)('by wildcard: granted $granted, published $published', async ({ granted, published }) => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.all, granted)
    await publish(box, box.status, 'online', published)
    expect(message(await wire.next())).toMatchObject({ payload: 'online', qos: Math.min(granted, published) })
    await wire.cut()
  })

  test('(differs) by wildcard: granted 1, published 2 comes at 2', async () => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.all, 1)
    await publish(box, box.status, 'online', 2)
    expect(message(await wire.next())).toMatchObject({ payload: 'online', qos: 2 })
    await wire.cut()
  })
})

test('[MQTT-3.8.4-3] a filter again replaces the subscription: its QoS is the new one, messages come once', async () => {
  const box = broker.newBox()
  const wire = await broker.watch(box, box.status, 0)
  wire.send(subscribePacket(2, [box.status, 1]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [1] })
  await publish(box, box.status, 'online')
  expect(message(await wire.next())).toMatchObject({ payload: 'online', qos: 1 })
  expect(await messagesBefore(broker, box, wire)).toEqual([])
  await wire.cut()
})

test('[MQTT-3.8.4-3] and retained messages come again', async () => {
  const box = broker.newBox()
  const publisher = await broker.connect(box, { clientId: 'publisher' })
  publisher.send(publishPacket(box.status, 'online', { qos: 1, messageId: 1, retain: true }))
  expect(await publisher.next()).toMatchObject({ cmd: 'puback' })
  const wire = await broker.watch(box, box.status, 0)
  expect(message(await wire.next())).toMatchObject({ payload: 'online', retain: true })
  wire.send(subscribePacket(2, [box.status, 0]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback' })
  expect(message(await wire.next())).toMatchObject({ payload: 'online', retain: true })
  await Promise.all([wire.cut(), publisher.cut()])
})

test('(differs) [MQTT-3.3.5-1] filters that overlap: a message comes once, at the QoS of one of them', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(subscribePacket(1, [box.all, 0], [box.status, 1]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [0, 1] })
  await publish(box, box.status, 'online')
  expect([0, 1]).toContain(message(await wire.next()).qos)
  expect(await messagesBefore(broker, box, wire)).toEqual([])
  await wire.cut()
})

describe('UNSUBSCRIBE', () => {
  test('[MQTT-3.10.4-4] is answered with its packet identifier, and nothing more comes [MQTT-3.10.4-2]', async () => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.status, 1)
    wire.send(unsubscribePacket(77, box.status))
    expect(await wire.next()).toMatchObject({ cmd: 'unsuback', messageId: 77 })
    await publish(box, box.status, 'unheard')
    wire.send(subscribePacket(78, [box.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', messageId: 78 })
    await wire.cut()
  })

  test('[MQTT-3.10.4-5] is answered also where there was no subscription', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(unsubscribePacket(5, box.status, 'coalhand/elsewhere/box/status'))
    expect(await wire.next()).toMatchObject({ cmd: 'unsuback', messageId: 5 })
    await wire.cut()
  })

  test('[MQTT-3.10.4-1] takes the filter that is the same, character by character', async () => {
    const box = broker.newBox()
    const wire = await broker.watch(box, box.all, 1)
    wire.send(unsubscribePacket(2, box.status, box.all.replace('#', '+')))
    expect(await wire.next()).toMatchObject({ cmd: 'unsuback', messageId: 2 })
    await publish(box, box.status, 'still heard')
    expect(message(await wire.next()).payload).toBe('still heard')
    await wire.cut()
  })

  test('[MQTT-3.10.4-6] of several filters is answered once', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(subscribePacket(1, [box.status, 1], [box.readings, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback' })
    wire.send(unsubscribePacket(2, box.status, box.readings))
    expect(await wire.next()).toMatchObject({ cmd: 'unsuback', messageId: 2 })
    await publish(box, box.status, 'unheard')
    await publish(box, box.readings, 'unheard')
    wire.send(subscribePacket(3, [box.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', messageId: 3 })
    await wire.cut()
  })

  test('[MQTT-3.10.4-1] ends it for the kept session too', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'kept', clean: false })
    first.send(subscribePacket(1, [box.status, 1], [box.readings, 1]))
    expect(await first.next()).toMatchObject({ cmd: 'suback' })
    first.send(unsubscribePacket(2, box.status))
    expect(await first.next()).toMatchObject({ cmd: 'unsuback' })
    await first.cut()
    await publish(box, box.status, 'unheard')
    await publish(box, box.readings, 'heard')
    const second = broker.open()
    second.send(connectPacket({ ...credentials(box), clientId: 'kept', clean: false }))
    expect(await second.next()).toMatchObject({ cmd: 'connack', sessionPresent: true })
    expect(message(await second.next()).payload).toBe('heard')
    await second.cut()
  })

  test.each([
    ['[MQTT-3.10.3-2] without a filter', 1, []],
    ['[MQTT-2.3.1-1] under packet identifier 0', 0, [field('coalhand/yard/box/status')]],
  ])('(differs) %s is answered', async (_name, messageId, filters) => {
    const wire = await broker.connect(broker.newBox())
    wire.send(rawPacket(0xa2, number16(messageId), ...filters))
    expect(await wire.next()).toMatchObject({ cmd: 'unsuback', messageId })
    await wire.cut()
  })
})
