import { describe, expect, test } from 'vitest'
import { createPacketScanner } from './packet-scanner.ts'

/** A packet with a body of zeros. */
function packet(firstByte: number, bodyBytes: number): Uint8Array {
  const length: number[] = []
  let left = bodyBytes
  do {
    const rest = Math.floor(left / 128)
    length.push((left % 128) + (rest > 0 ? 128 : 0))
    left = rest
  } while (left > 0)
  return Uint8Array.from([firstByte, ...length, ...new Uint8Array(bodyBytes)])
}

function sizesOf(chunks: Uint8Array[], limit = 65_536) {
  const scanner = createPacketScanner(limit)
  const found: [number, number][] = []
  for (const chunk of chunks) scanner.scan(chunk, (_end, firstByte, bytes) => found.push([firstByte, bytes]))
  return found
}

describe('createPacketScanner', () => {
  const packets = [
    packet(0x10, 30),
    packet(0xc0, 0),
    packet(0x32, 127),
    packet(0x32, 128),
    packet(0x30, 20_000),
  ]
  const expected = [
    [0x10, 32],
    [0xc0, 2],
    [0x32, 129],
    [0x32, 131],
    [0x30, 20_004],
  ]
  const stream = Buffer.concat(packets)

  test('finds each packet of a stream', () => {
    expect(sizesOf([stream])).toEqual(expected)
  })

  test.each([1, 2, 3, 7, 129, 1000])('finds the same however the stream is cut (%d bytes)', (size) => {
    const chunks = []
    for (let at = 0; at < stream.length; at += size) chunks.push(stream.subarray(at, at + size))
    expect(sizesOf(chunks)).toEqual(expected)
  })

  test('says where in the chunk a packet ends', () => {
    const scanner = createPacketScanner(65_536)
    const ends: number[] = []
    scanner.scan(Buffer.concat([packet(0xc0, 0), packet(0x30, 5)]), (end) => ends.push(end))
    expect(ends).toEqual([2, 9])
  })

  test('a packet above the limit is a fault once its header is read', () => {
    const scanner = createPacketScanner(65_536)
    const header = packet(0x32, 5_000_000).subarray(0, 5)
    expect(scanner.scan(header, () => expect.unreachable())).toEqual({
      kind: 'too-large',
      bytes: 5_000_005,
      publish: true,
      bodyAt: 5,
    })
  })

  test('the limit itself is allowed', () => {
    expect(sizesOf([packet(0x30, 65_532)])).toEqual([[0x30, 65_536]])
  })

  test('a remaining length of five bytes is malformed (MQTT-2.2.3)', () => {
    const scanner = createPacketScanner(65_536)
    expect(scanner.scan(Uint8Array.from([0x30, 255, 255, 255, 255, 1]), () => undefined)).toEqual({
      kind: 'malformed',
    })
  })
})
