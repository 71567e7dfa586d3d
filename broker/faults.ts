import type { Refusal } from './device.ts'
import type { ScanFault } from './packet-scanner.ts'

/**
 * A packet that is too large, as a refusal.
 * @param chunk what was read last, with as much of the packet as has come
 */
export function tooLarge(
  fault: Exclude<ScanFault, { kind: 'malformed' }>,
  chunk: Buffer,
  maxPacketBytes: number,
): Omit<Refusal, 'device'> {
  if (fault.kind === 'frame-too-large') {
    const detail = `a frame of more than ${fault.maxBytes} bytes`
    return { topic: '', reason: 'too-large', detail, payload: Buffer.alloc(0) }
  }
  const { topic, payload } = fault.publish
    ? beginningOfPublish(chunk.subarray(fault.bodyAt))
    : { topic: '', payload: Buffer.alloc(0) }
  const detail = `a packet of ${fault.bytes} bytes; at most ${maxPacketBytes} are taken`
  return { topic, reason: 'too-large', detail, payload }
}

/** Topic and first bytes of a PUBLISH whose variable header begins here, as far as they are there. */
function beginningOfPublish(body: Buffer): { topic: string; payload: Buffer } {
  const length = body.length >= 2 ? body.readUInt16BE(0) : 0
  return {
    topic: body.toString('utf8', 2, 2 + length),
    payload: body.subarray(2 + length + 2, 2 + length + 202),
  }
}
