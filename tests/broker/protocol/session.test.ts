import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import type { Packet } from 'mqtt-packet'
import {
  boxSecret,
  credentials,
  idOf,
  message,
  startBareBroker,
  type BareBroker,
  type Box,
} from './bare-broker.ts'
import { ackPacket, connectPacket, disconnect, publishPacket, subscribePacket } from './packets.ts'
import type { Wire } from './wire.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

/** Connects under a kept session's name. */
async function resume(box: Box, clean = false): Promise<{ wire: Wire; sessionPresent: boolean }> {
  const wire = broker.open()
  wire.send(connectPacket({ ...credentials(box), clientId: 'kept', clean }))
  const answer = await wire.next()
  if (answer.cmd !== 'connack') throw new Error(`CONNACK was expected; ${answer.cmd} came`)
  expect(answer.returnCode).toBe(0)
  return { wire, sessionPresent: answer.sessionPresent }
}

/** A kept session that has subscribed and is connected. */
async function keptSession(box: Box, filter: string, qos: 0 | 1 | 2): Promise<Wire> {
  const { wire, sessionPresent } = await resume(box)
  expect(sessionPresent).toBe(false)
  wire.send(subscribePacket(1, [filter, qos]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [qos] })
  return wire
}

/** Another connection of the device publishes at QoS 1 and waits for each acknowledgement. */
async function publishAll(box: Box, payloads: string[], qos: 1 | 2 = 1) {
  const wire = await broker.connect(box, { clientId: 'publisher' })
  for (const [index, payload] of payloads.entries()) {
    const messageId = index + 1
    wire.send(publishPacket(box.status, payload, { qos, messageId }))
    expect(await wire.next()).toMatchObject({ cmd: qos === 1 ? 'puback' : 'pubrec', messageId })
    if (qos === 1) continue
    wire.send(ackPacket('pubrel', messageId))
    expect(await wire.next()).toMatchObject({ cmd: 'pubcomp', messageId })
  }
  await wire.cut()
}

async function take(wire: Wire, count: number): Promise<Packet[]> {
  const packets: Packet[] = []
  while (packets.length < count) packets.push(await wire.next())
  return packets
}

const payloads = (packets: Packet[]) => packets.map((packet) => message(packet).payload)

describe('session present', () => {
  test('[MQTT-3.2.2-1] is 0 for a clean session, even where one was kept', async () => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 1)).cut()
    expect((await resume(box, true)).sessionPresent).toBe(false)
  })

  test('[MQTT-3.2.2-2] is 1 where a session was kept', async () => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 1)).cut()
    expect((await resume(box)).sessionPresent).toBe(true)
  })

  test('[MQTT-3.2.2-3] is 0 where none was', async () => {
    expect((await resume(broker.newBox())).sessionPresent).toBe(false)
  })

  test('(differs) [MQTT-3.2.2-2] is 0 for a kept session that has subscribed to nothing', async () => {
    const box = broker.newBox()
    await (await resume(box)).wire.cut()
    expect((await resume(box)).sessionPresent).toBe(false)
  })
})

describe('[MQTT-3.1.2-4] a kept session', () => {
  test('has its subscriptions again without asking', async () => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 1)).cut()
    const { wire } = await resume(box)
    await publishAll(box, ['online'])
    expect(message(await wire.next())).toMatchObject({ topic: box.status, payload: 'online', qos: 1 })
    await wire.cut()
  })

  test('outlives a DISCONNECT too', async () => {
    const box = broker.newBox()
    const first = await keptSession(box, box.status, 1)
    first.send(disconnect)
    await first.rest()
    expect((await resume(box)).sessionPresent).toBe(true)
  })

  test('is a device’s own: another device’s same client id has nothing of it', async () => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 1)).cut()
    const other = await resume(broker.newBox())
    expect(other.sessionPresent).toBe(false)
    await publishAll(box, ['online'])
    expect(other.wire.waiting()).toBe(0)
    await other.wire.cut()
  })
})

test.each([1, 2] as const)(
  '[MQTT-3.1.2-5] messages at QoS %d that come while it is away wait for it, in order [MQTT-4.6.0-1]',
  async (qos) => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 2)).cut()
    const sent = Array.from({ length: 20 }, (_, index) => `waiting ${index}`)
    await publishAll(box, sent, qos)
    const { wire } = await resume(box)
    const packets = await take(wire, sent.length)
    expect(payloads(packets)).toEqual(sent)
    expect(packets.every((packet) => packet.cmd === 'publish' && packet.qos === qos)).toBe(true)
    await wire.cut()
  },
)

test('[MQTT-3.1.2-5] what waited comes once: acknowledged, it does not come again', async () => {
  const box = broker.newBox()
  await (await keptSession(box, box.status, 1)).cut()
  await publishAll(box, ['once'])
  const { wire } = await resume(box)
  wire.send(ackPacket('puback', idOf(await wire.next())))
  // An answer to what follows says that the acknowledgement was taken.
  wire.send(subscribePacket(9, [box.readings, 0]))
  expect(await wire.next()).toMatchObject({ cmd: 'suback' })
  await wire.cut()
  const again = await resume(box)
  await publishAll(box, ['a later one'])
  expect(message(await again.wire.next()).payload).toBe('a later one')
  await again.wire.cut()
})

describe('[MQTT-3.1.2-6] a clean session', () => {
  test('discards the one that was kept, with its subscriptions and what waited', async () => {
    const box = broker.newBox()
    await (await keptSession(box, box.status, 1)).cut()
    await publishAll(box, ['waiting'])
    await (await resume(box, true)).wire.cut()
    const after = await resume(box)
    expect(after.sessionPresent).toBe(false)
    await publishAll(box, ['nobody subscribed'])
    after.wire.send(subscribePacket(1, [box.status, 1]))
    expect(await after.wire.next()).toMatchObject({ cmd: 'suback' })
    await publishAll(box, ['for the new one'])
    expect(message(await after.wire.next()).payload).toBe('for the new one')
    await after.wire.cut()
  })

  test('ends with its connection', async () => {
    const box = broker.newBox()
    const first = await resume(box, true)
    first.wire.send(subscribePacket(1, [box.status, 1]))
    expect(await first.wire.next()).toMatchObject({ cmd: 'suback' })
    await first.wire.cut()
    await publishAll(box, ['nobody is there'])
    const second = await resume(box)
    expect(second.sessionPresent).toBe(false)
    second.wire.send(subscribePacket(1, [box.status, 1]))
    expect(await second.wire.next()).toMatchObject({ cmd: 'suback' })
    await publishAll(box, ['now'])
    expect(message(await second.wire.next()).payload).toBe('now')
    await second.wire.cut()
  })
})

describe('[MQTT-4.4.0-1] after reconnecting to a kept session', () => {
  test('a PUBLISH that was not acknowledged comes again, in order, under its packet identifier [MQTT-4.6.0-1]', async () => {
    const box = broker.newBox()
    const first = await keptSession(box, box.status, 1)
    await publishAll(box, ['a', 'b', 'c'])
    const before = await take(first, 3)
    expect(before.every((packet) => packet.cmd === 'publish' && !packet.dup)).toBe(true)
    await first.cut()
    const { wire } = await resume(box)
    const after = await take(wire, 3)
    expect(payloads(after)).toEqual(['a', 'b', 'c'])
    expect(after.map(idOf)).toEqual(before.map(idOf))
    await wire.cut()
  })

  test('a PUBREL that was not answered comes again instead of its PUBLISH [MQTT-4.3.3-1]', async () => {
    const box = broker.newBox()
    const first = await keptSession(box, box.status, 2)
    await publishAll(box, ['twice sure'], 2)
    const messageId = idOf(await first.next())
    first.send(ackPacket('pubrec', messageId))
    expect(await first.next()).toMatchObject({ cmd: 'pubrel', messageId })
    await first.cut()
    const { wire } = await resume(box)
    expect(await wire.next()).toMatchObject({ cmd: 'pubrel', messageId })
    wire.send(ackPacket('pubcomp', messageId))
    wire.send(subscribePacket(9, [box.readings, 0]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback' })
    await wire.cut()
    const third = await resume(box)
    await publishAll(box, ['later'])
    expect(message(await third.wire.next()).payload).toBe('later')
    await third.wire.cut()
  })
})

describe('[MQTT-3.1.4-2] a second connection with the same client id', () => {
  test('takes over: the first is closed', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'same' })
    const second = await broker.connect(box, { clientId: 'same' })
    expect(await first.rest()).toEqual([])
    second.send(publishPacket(box.readings, 'second', { qos: 1, messageId: 1 }))
    expect(await second.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    await second.cut()
  })

  test('takes over the kept session, and what was under way comes again on it', async () => {
    const box = broker.newBox()
    const first = await keptSession(box, box.status, 1)
    await publishAll(box, ['under way'])
    const messageId = idOf(await first.next())
    const { wire: second, sessionPresent } = await resume(box)
    expect(sessionPresent).toBe(true)
    expect(await first.rest()).toEqual([])
    const again = await second.next()
    expect(message(again).payload).toBe('under way')
    expect(idOf(again)).toBe(messageId)
    await second.cut()
  })

  test('does not wait for what the first has under way, which is stored all the same', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'same' })
    const release = broker.holdStore()
    first.send(publishPacket(box.readings, 'of the first', { qos: 1, messageId: 1 }))
    await expect.poll(() => broker.stored(box)).toEqual(['of the first'])
    const second = await broker.connect(box, { clientId: 'same' })
    expect(await first.rest()).toEqual([])
    release()
    second.send(publishPacket(box.readings, 'of the second', { qos: 1, messageId: 1 }))
    expect(await second.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(broker.stored(box)).toEqual(['of the first', 'of the second'])
    await second.cut()
  })

  test('with a wrong secret does not', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'same' })
    const intruder = broker.open()
    intruder.send(
      connectPacket({ username: box.username, password: Buffer.from(`not ${boxSecret}`), clientId: 'same' }),
    )
    expect(await intruder.rest()).toMatchObject([{ cmd: 'connack', returnCode: 4 }])
    first.send(publishPacket(box.readings, 'still here', { qos: 1, messageId: 1 }))
    expect(await first.next()).toMatchObject({ cmd: 'puback' })
    await first.cut()
  })

  test('of another device does not', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'same' })
    const other = await broker.connect(broker.newBox(), { clientId: 'same' })
    first.send(publishPacket(box.readings, 'still here', { qos: 1, messageId: 1 }))
    expect(await first.next()).toMatchObject({ cmd: 'puback' })
    expect(other.isOpen()).toBe(true)
    await Promise.all([first.cut(), other.cut()])
  })
})
