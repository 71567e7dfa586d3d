import { isPublish, isUnacknowledged } from './packet-scanner.ts'

/** Of a packet that is held, what its passing depends on. */
export const packetKind = { other: 0, publish: 1, unacknowledged: 2, subscribe: 3 } as const
export type PacketKind = (typeof packetKind)[keyof typeof packetKind]

/** Type of a SUBSCRIBE packet (MQTT 3.1.1, table 2.1). */
const subscribeType = 8

export function kindOf(firstByte: number): PacketKind {
  if (!isPublish(firstByte)) return firstByte >> 4 === subscribeType ? packetKind.subscribe : packetKind.other
  return isUnacknowledged(firstByte) ? packetKind.unacknowledged : packetKind.publish
}

export function isPublishKind(kind: PacketKind): boolean {
  return kind === packetKind.publish || kind === packetKind.unacknowledged
}
