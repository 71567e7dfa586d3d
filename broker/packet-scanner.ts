/** Type of a PUBLISH packet, the upper half of its first byte (MQTT 3.1.1, table 2.1). */
const publishType = 3

/** The longest encoding of a remaining length, in bytes (MQTT 3.1.1, section 2.2.3). */
const maxLengthBytes = 4

/** Why a stream cannot be read on. */
export type ScanFault =
  | { kind: 'malformed' }
  /** Of what carries the packets; `maxBytes` is what it may have. */
  | { kind: 'frame-too-large'; maxBytes: number }
  /** `bytes` is what the fixed header announces; `bodyAt` where in the chunk the variable header begins. */
  | { kind: 'too-large'; bytes: number; publish: boolean; bodyAt: number }

export interface PacketScanner {
  /**
   * Walks the next chunk of a stream and tells of each packet that ends in it: where, its first byte and its size.
   * A packet above the limit is a fault as soon as its fixed header is read, before any of its body.
   */
  scan(
    chunk: Uint8Array,
    onPacket: (end: number, firstByte: number, bytes: number) => void,
  ): ScanFault | undefined
}

/** Finds packets in a stream of MQTT by their fixed headers alone, without keeping or copying a byte. */
export function createPacketScanner(maxPacketBytes: number): PacketScanner {
  let firstByte = -1
  let lengthBytes = 0
  let remaining = 0
  let bodyLeft = -1
  let total = 0

  return {
    scan: (chunk, onPacket) => {
      let at = 0
      while (at < chunk.length) {
        if (bodyLeft >= 0) {
          const taken = Math.min(bodyLeft, chunk.length - at)
          bodyLeft -= taken
          at += taken
        } else if (firstByte < 0) {
          firstByte = chunk[at++] ?? 0
          lengthBytes = 0
          remaining = 0
          continue
        } else {
          const byte = chunk[at++] ?? 0
          remaining += (byte & 127) * 128 ** lengthBytes++
          if (byte >= 128) {
            if (lengthBytes >= maxLengthBytes) return { kind: 'malformed' }
            continue
          }
          bodyLeft = remaining
          total = 1 + lengthBytes + remaining
          if (total > maxPacketBytes) {
            return { kind: 'too-large', bytes: total, publish: isPublish(firstByte), bodyAt: at }
          }
        }
        if (bodyLeft === 0) {
          onPacket(at, firstByte, total)
          firstByte = -1
          bodyLeft = -1
        }
      }
      return undefined
    },
  }
}

/** Whether a PUBLISH with this first byte has QoS 0: nobody waits for its acknowledgement. */
export function isUnacknowledged(firstByte: number): boolean {
  return (firstByte & 0b110) === 0
}

/** Whether a packet with this first byte is a PUBLISH. */
export function isPublish(firstByte: number): boolean {
  return firstByte >> 4 === publishType
}
