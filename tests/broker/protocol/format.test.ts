import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { maxPayloadBytes } from '#shared/contract/mqtt.ts'
import { credentials, startBareBroker, type BareBroker } from './bare-broker.ts'
import {
  connectPacket,
  field,
  number16,
  pingRequest,
  publishPacket,
  rawPacket,
  rawPublish,
  subscribePacket,
} from './packets.ts'
import { generate } from 'mqtt-packet'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

/** Sends bytes on a fresh connection of a device. @returns what the broker sends until it closes */
async function closingOf(...parts: Uint8Array[]) {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(...parts)
  const rest = await wire.rest()
  expect(broker.stored(box)).toEqual([])
  return rest
}

const sharp = [0x63, 0x6f]
describe('[MQTT-1.5.3-1] text that is not well-formed UTF-8 closes the connection', () => {
  const illFormed: [string, number[]][] = [
    ['a lone surrogate', [...sharp, 0xed, 0xa0, 0x80]],
    ['an overlong slash', [...sharp, 0xc0, 0xaf]],
    ['a byte that begins nothing', [...sharp, 0xff]],
    ['a character cut short', [...sharp, 0xe2, 0x82]],
  ]
  test.each(illFormed)('in a topic: %s', async (_name, bytes) => {
    expect(await closingOf(rawPublish(bytes, 1))).toEqual([])
  })
})

test('[MQTT-1.5.3-2] U+0000 in a topic closes the connection', async () => {
  expect(await closingOf(rawPublish('coalhand/\0', 1))).toEqual([])
})

test('[MQTT-1.5.3-3] U+FEFF is a character of a topic like others: with it, it is not the device’s own', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(publishPacket(`\uFEFF${box.readings}`, '[]', { qos: 1, messageId: 1 }))
  expect(await wire.rest()).toEqual([])
  expect(broker.refusals(box)).toMatchObject([{ reason: 'foreign-topic', topic: `\uFEFF${box.readings}` }])
})

describe('[2.2.1] a packet of a reserved type closes the connection', () => {
  test.each([
    ['0', [0x00, 0x00]],
    ['15', [0xf0, 0x00]],
  ])('%s', async (_type, bytes) => {
    expect(await closingOf(Buffer.from(bytes))).toEqual([])
  })
})

describe('[2.2.1] a packet that only a server sends closes the connection', () => {
  test.each([
    ['CONNACK', [0x20, 2, 0, 0]],
    ['SUBACK', [0x90, 3, 0, 1, 0]],
    ['UNSUBACK', [0xb0, 2, 0, 1]],
    ['PINGRESP', [0xd0, 0]],
  ])('%s', async (_name, bytes) => {
    expect(await closingOf(Buffer.from(bytes))).toEqual([])
  })
})

describe('[MQTT-2.2.2-2] reserved flags that are not as they must be close the connection', () => {
  const filter = field('coalhand/yard/box/status')
  test.each([
    ['CONNECT again', rawPacket(0x11, Buffer.alloc(10))],
    ['PUBACK', rawPacket(0x42, number16(1))],
    ['PUBREC', rawPacket(0x51, number16(1))],
    ['PUBREL [MQTT-3.6.1-1]', rawPacket(0x60, number16(1))],
    ['PUBCOMP', rawPacket(0x78, number16(1))],
    ['SUBSCRIBE [MQTT-3.8.1-1]', rawPacket(0x80, number16(1), filter, Buffer.from([0]))],
    ['SUBSCRIBE with one more [MQTT-3.8.1-1]', rawPacket(0x83, number16(1), filter, Buffer.from([0]))],
    ['UNSUBSCRIBE [MQTT-3.10.1-1]', rawPacket(0xa0, number16(1), filter)],
    ['PINGREQ', Buffer.from([0xc1, 0])],
    ['DISCONNECT [MQTT-3.14.1-1]', Buffer.from([0xe1, 0])],
  ])('%s', async (_name, bytes) => {
    expect(await closingOf(bytes)).toEqual([])
  })
})

describe('[2.2.3] the remaining length', () => {
  test('of five bytes is malformed and closes the connection', async () => {
    expect(await closingOf(Buffer.from([0x30, 0x80, 0x80, 0x80, 0x80, 0x01]))).toEqual([])
  })

  test.each([
    ['one byte', 127],
    ['two bytes', 128],
    ['two bytes, the longest', 16_383],
    ['three bytes', 16_384],
  ])('of %s is read as it is meant', async (_name, length) => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    const payload = 'x'.repeat(length - 2 - box.readings.length - 2)
    const packet = generate(publishPacket(box.readings, payload, { qos: 1, messageId: 7 }))
    wire.send(packet)
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
    expect(broker.stored(box)).toEqual([payload])
    await wire.cut()
  })

  test('shorter than the fields in it closes the connection', async () => {
    // A topic of twenty bytes in a packet of four.
    expect(await closingOf(rawPacket(0x30, number16(20), Buffer.from('co')))).toEqual([])
  })
})

describe('a packet above 64 kB', () => {
  test('is refused at its fixed header, without one byte of its body, and is on record', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(Buffer.from([0x32, 0x80, 0x80, 0x04]))
    expect(await wire.rest()).toEqual([])
    expect(broker.refusals(box)).toMatchObject([{ reason: 'too-large' }])
  })

  test('of exactly 64 kB is taken', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    const payload = 'x'.repeat(maxPayloadBytes - 4 - 2 - box.readings.length - 2)
    wire.send(publishPacket(box.readings, payload, { qos: 1, messageId: 1 }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(broker.refusals(box)).toEqual([])
    await wire.cut()
  })

  test('is refused before signing in as well', async () => {
    const wire = broker.open()
    wire.send(Buffer.from([0x10, 0x80, 0x80, 0x04]))
    expect(await wire.rest()).toEqual([])
  })
})

describe('[4.2] packets are found in the stream however it is cut', () => {
  test('byte by byte', async () => {
    const box = broker.newBox()
    const wire = broker.open()
    const stream = Buffer.concat([
      generate(connectPacket(credentials(box))),
      generate(subscribePacket(1, [box.status, 1])),
      pingRequest,
      generate(publishPacket(box.readings, 'in pieces', { qos: 1, messageId: 2 })),
    ])
    for (const byte of stream) {
      wire.send(Buffer.from([byte]))
      await new Promise(setImmediate)
    }
    const answers = [await wire.next(), await wire.next(), await wire.next(), await wire.next()]
    // PINGRESP has no place among the others (section 4.6).
    expect(answers.map(({ cmd }) => cmd).filter((cmd) => cmd !== 'pingresp')).toEqual([
      'connack',
      'suback',
      'puback',
    ])
    expect(answers.some(({ cmd }) => cmd === 'pingresp')).toBe(true)
    expect(broker.stored(box)).toEqual(['in pieces'])
    await wire.cut()
  })

  test('all in one segment', async () => {
    const box = broker.newBox()
    const wire = broker.open()
    const ids = Array.from({ length: 50 }, (_, index) => index + 1)
    wire.send(
      connectPacket(credentials(box)),
      ...ids.map((messageId) => publishPacket(box.readings, `n${messageId}`, { qos: 1, messageId })),
    )
    expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    for (const messageId of ids) expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId })
    expect(broker.stored(box)).toEqual(ids.map((id) => `n${id}`))
    await wire.cut()
  })

  test('what is malformed does not take with it what came before it in the same segment', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.readings, 'sound', { qos: 1, messageId: 1 }), Buffer.from([0xf0, 0]))
    await wire.rest()
    expect(broker.stored(box)).toEqual(['sound'])
  })
})
