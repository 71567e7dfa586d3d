import { generate, type IPublishPacket } from 'mqtt-packet'
import { describe, expect, test } from 'vitest'
import { readPlainPublish } from './plain-publish.ts'

const topic = 'coalhand/quarry-road/north-box/readings'
const topicBytes = Buffer.from(topic)
const usual: IPublishPacket = {
  cmd: 'publish',
  topic,
  payload: '[{"n":"1"}]',
  qos: 1,
  messageId: 513,
  dup: false,
  retain: false,
}

function read(packet: Partial<IPublishPacket>) {
  return readBytes(generate({ ...usual, ...packet }))
}

/** Among other bytes, as in a chunk of a stream. */
function readBytes(packet: Buffer) {
  const chunk = Buffer.concat([Buffer.from([1, 2, 3]), packet, Buffer.alloc(50, 0x30)])
  return readPlainPublish(chunk, 3, 3 + packet.length, topicBytes)
}

describe('readPlainPublish', () => {
  test('reads what devices send all day', () => {
    expect(read({})).toEqual({ messageId: 513, payload: Buffer.from('[{"n":"1"}]') })
    expect(read({ dup: true })).toEqual({ messageId: 513, payload: Buffer.from('[{"n":"1"}]') })
    expect(read({ qos: 0 })).toEqual({ messageId: 0, payload: Buffer.from('[{"n":"1"}]') })
    expect(read({ payload: '' })).toEqual({ messageId: 513, payload: Buffer.alloc(0) })
  })

  test.each([10, 100, 200, 20_000, 60_000])('reads a payload of %d bytes', (length) => {
    const payload = 'x'.repeat(length)
    expect(read({ payload })?.payload.toString()).toBe(payload)
  })

  test.each([
    ['QoS 2', { qos: 2 }],
    ['retained', { retain: true }],
    ['another topic', { topic: `${topic}x` }],
    ['a topic of the same length', { topic: topic.replace('north', 'south') }],
    ['a shorter topic', { topic: topic.slice(0, -1) }],
  ] as const)('leaves %s to the library', (_what, packet) => {
    expect(read(packet)).toBeUndefined()
  })

  test('leaves faults to the library', () => {
    const packet = generate(usual)
    const withoutId = Buffer.from(packet)
    withoutId.writeUInt16BE(0, packet.indexOf(topicBytes) + topicBytes.length)
    expect(readBytes(withoutId)).toBeUndefined()
    const dupAtQos0 = generate({ ...usual, qos: 0 })
    dupAtQos0[0] = 0x38
    expect(readBytes(dupAtQos0)).toBeUndefined()
    const qos3 = Buffer.from(packet)
    qos3[0] = 0x36
    expect(readBytes(qos3)).toBeUndefined()
    // Its fixed header ends it before its topic does, whatever stands behind it.
    expect(readBytes(Buffer.concat([Buffer.from([0x32, 10]), packet.subarray(2, 12)]))).toBeUndefined()
    expect(readBytes(Buffer.from([0x30, 0]))).toBeUndefined()
  })
})
