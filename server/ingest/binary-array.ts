/**
 * Arrays as PostgreSQL takes them in its binary format (src/backend/utils/adt/arrayfuncs.c, `array_recv`): number of
 * dimensions, whether there are nulls, the elements' type, then length and lower bound, then each element with its
 * length in front. A buffer bound to `?::int[]` goes to the database as it is. A batch's thousands of numbers cost a
 * quarter less this way than as text, on both sides.
 */
const headBytes = 20
/** The elements' types, from PostgreSQL's `pg_type`. */
const oid = { int4: 23, float8: 701, timestamptz: 1184 } as const

/** For `int[]`: whole numbers of 32 bits. */
export function intArray(length: number, at: (index: number) => number): Buffer {
  const buffer = begin(oid.int4, length, 4)
  for (let index = 0, offset = headBytes; index < length; index++, offset += 8) {
    buffer.writeInt32BE(4, offset)
    buffer.writeInt32BE(at(index), offset + 4)
  }
  return buffer
}

/** For `float8[]`. */
export function doubleArray(length: number, at: (index: number) => number): Buffer {
  const buffer = begin(oid.float8, length, 8)
  for (let index = 0, offset = headBytes; index < length; index++, offset += 12) {
    buffer.writeInt32BE(8, offset)
    buffer.writeDoubleBE(at(index), offset + 4)
  }
  return buffer
}

/** PostgreSQL counts its time in microseconds from 2000-01-01 UTC. */
const epochMs = 946_684_800_000
const twoTo32 = 4_294_967_296

/** For `timestamptz[]`. @param atMs milliseconds since 1970 UTC, whole ones */
export function timeArray(length: number, atMs: (index: number) => number): Buffer {
  const buffer = begin(oid.timestamptz, length, 8)
  for (let index = 0, offset = headBytes; index < length; index++, offset += 12) {
    const microseconds = (atMs(index) - epochMs) * 1000
    // Two halves: a double holds these numbers exactly, and a 64-bit integer of JavaScript's is slow to make.
    const high = Math.floor(microseconds / twoTo32)
    buffer.writeInt32BE(8, offset)
    buffer.writeInt32BE(high, offset + 4)
    buffer.writeUInt32BE(microseconds - high * twoTo32, offset + 8)
  }
  return buffer
}

function begin(type: number, length: number, elementBytes: number): Buffer {
  const buffer = Buffer.allocUnsafe(headBytes + length * (4 + elementBytes))
  buffer.writeInt32BE(1, 0)
  buffer.writeInt32BE(0, 4)
  buffer.writeInt32BE(type, 8)
  buffer.writeInt32BE(length, 12)
  buffer.writeInt32BE(1, 16)
  return buffer
}
