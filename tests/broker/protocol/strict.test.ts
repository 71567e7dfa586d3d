import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import {
  boxSecret,
  credentials,
  idOf,
  message,
  messagesBefore,
  startBareBroker,
  type BareBroker,
  type Box,
} from './bare-broker.ts'
import {
  ackPacket,
  connectFlag,
  connectPacket,
  field,
  number16,
  publishPacket,
  rawConnect,
  rawPacket,
  rawPublish,
  subscribePacket,
} from './packets.ts'
import type { Wire } from './wire.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

const kept = { clientId: 'kept', clean: false }
const both = connectFlag.clean | connectFlag.username | connectFlag.password

async function publish(box: Box, payload: string, options: { dup?: boolean; retain?: boolean } = {}) {
  const wire = await broker.connect(box, { clientId: 'publisher' })
  wire.send(publishPacket(box.status, payload, { qos: 1, messageId: 1, ...options }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  await wire.cut()
}

async function subscribed(box: Box): Promise<Wire> {
  const wire = await broker.connect(box, kept)
  wire.send(subscribePacket(1, [box.status, 1]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [1] })
  return wire
}

test('[3.9.3] a kept session that was refused a filter gets nothing of it, now or when it comes back', async () => {
  const other = broker.newBox()
  const box = broker.newBox()
  const first = await broker.connect(box, kept)
  first.send(subscribePacket(1, [box.status, 1], [other.status, 1], ['coalhand/#', 1]))
  expect(await first.next()).toMatchObject({ cmd: 'suback', granted: [1, 128, 128] })
  await publish(other, 'not yours, here')
  await first.cut()
  await publish(other, 'not yours, away')
  const second = await broker.connect(box, kept)
  expect((await messagesBefore(broker, box, second)).map(message)).toEqual([])
  await second.cut()
})

test('[MQTT-3.1.3-8] an empty client id with a kept session: return code 2, then closed [MQTT-3.1.3-7]', async () => {
  const box = broker.newBox()
  const wire = broker.open()
  const flags = both & ~connectFlag.clean
  wire.send(rawConnect({ flags, fields: [field(''), field(box.username), field(boxSecret)] }))
  expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 2, sessionPresent: false }])
})

describe('[MQTT-4.3.3-2] a PUBLISH at QoS 2 that is repeated before PUBREL is stored once', () => {
  test('on the same connection', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.readings, 'exactly once', { qos: 2, messageId: 9 }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
    wire.send(publishPacket(box.readings, 'exactly once', { qos: 2, messageId: 9, dup: true }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 9 })
    expect(broker.stored(box)).toEqual(['exactly once'])
    await wire.cut()
  })

  test('after reconnecting to a kept session', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, kept)
    first.send(publishPacket(box.readings, 'exactly once', { qos: 2, messageId: 5 }))
    expect(await first.next()).toMatchObject({ cmd: 'pubrec', messageId: 5 })
    await first.cut()
    const wire = await broker.connect(box, kept)
    wire.send(publishPacket(box.readings, 'exactly once', { qos: 2, messageId: 5, dup: true }))
    expect(await wire.next()).toMatchObject({ cmd: 'pubrec', messageId: 5 })
    wire.send(ackPacket('pubrel', 5))
    expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId: 5 })
    expect(broker.stored(box)).toEqual(['exactly once'])
    await wire.cut()
  })
})

test('[MQTT-3.3.1-3] DUP of what comes in is not passed on', async () => {
  const box = broker.newBox()
  const watcher = await broker.watch(box, box.status, 1)
  await publish(box, 'online', { dup: true })
  expect(message(await watcher.next())).toMatchObject({ payload: 'online', dup: false })
  await watcher.cut()
})

test('[MQTT-3.3.1-9] what waited for a kept session comes without the retain flag', async () => {
  const box = broker.newBox()
  await (await subscribed(box)).cut()
  await publish(box, 'online', { retain: true })
  const wire = await broker.connect(box, kept)
  expect(message(await wire.next())).toMatchObject({ payload: 'online', retain: false, dup: false })
  await wire.cut()
})

test('[MQTT-3.3.1-1] what was sent and not acknowledged comes again with DUP', async () => {
  const box = broker.newBox()
  const first = await subscribed(box)
  await publish(box, 'online')
  const before = await first.next()
  expect(message(before)).toMatchObject({ payload: 'online', dup: false })
  await first.cut()
  const wire = await broker.connect(box, kept)
  const after = await wire.next()
  expect(message(after)).toMatchObject({ payload: 'online', dup: true })
  expect(idOf(after)).toBe(idOf(before))
  await wire.cut()
})

test('[MQTT-2.3.1-1] PUBLISH under packet identifier 0 closes the connection and is not stored', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(rawPublish(box.readings, 0))
  expect(await wire.rest()).toEqual([])
  expect(broker.stored(box)).toEqual([])
})

test('[MQTT-3.1.2-14] a will of QoS 3 closes the connection without an answer', async () => {
  const box = broker.newBox()
  const wire = broker.open()
  const flags = both | connectFlag.will | connectFlag.willQos(3)
  const will = [field(box.status), field('offline')]
  wire.send(rawConnect({ flags, fields: [field('x'), ...will, field(box.username), field(boxSecret)] }))
  expect(await wire.rest()).toEqual([])
})

describe('[MQTT-1.5.3-1] text that is not well-formed UTF-8 closes the connection, so does U+0000 [MQTT-1.5.3-2]', () => {
  const texts: [string, number[]][] = [
    ['ill-formed', [0x61, 0xff]],
    ['a surrogate', [0xed, 0xa0, 0x80]],
    ['U+0000', [0x61, 0]],
  ]
  test.each(texts)('a client id [MQTT-3.1.3-4]: %s', async (_name, clientId) => {
    const box = broker.newBox()
    const wire = broker.open()
    wire.send(rawConnect({ flags: both, fields: [field(clientId), field(box.username), field(boxSecret)] }))
    expect(await wire.rest()).toEqual([])
  })

  test.each(texts)('a filter [MQTT-3.8.3-1]: %s', async (_name, filter) => {
    const box = broker.newBox()
    const wire = broker.open()
    wire.send(connectPacket(credentials(box)), rawPacket(0x82, number16(1), field(filter), Buffer.from([0])))
    expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    expect(await wire.rest()).toEqual([])
  })
})
