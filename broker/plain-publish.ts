/** A PUBLISH at QoS 0 or 1, not retained, for the topic that was asked about. */
export interface PlainPublish {
  /** 0 at QoS 0: nobody waits for its acknowledgement. */
  messageId: number
  payload: Buffer
}

/**
 * Reads a whole PUBLISH packet (MQTT 3.1.1, section 3.3) if it is of the one kind that devices send all day.
 *
 * @param bytes where it stands, from `from` up to, not including, `end`
 * @param topic the topic in bytes
 * @returns undefined for any other packet, also for one with a fault in it
 */
export function readPlainPublish(
  bytes: Buffer,
  from: number,
  end: number,
  topic: Buffer,
): PlainPublish | undefined {
  const firstByte = bytes[from] ?? 0
  const qos = (firstByte >> 1) & 3
  const retained = (firstByte & 1) === 1
  if (firstByte >> 4 !== 3 || qos > 1 || retained) return undefined
  // With QoS 0 a set DUP is a fault [MQTT-3.3.1-2].
  if (qos === 0 && (firstByte & 8) !== 0) return undefined
  let at = from + 1
  while (((bytes[at] ?? 0) & 128) !== 0) at++
  at += 3
  const topicEnd = at + topic.length
  const payloadAt = topicEnd + (qos === 0 ? 0 : 2)
  if (payloadAt > end || bytes.readUInt16BE(at - 2) !== topic.length) return undefined
  if (bytes.compare(topic, 0, topic.length, at, topicEnd) !== 0) return undefined
  const messageId = qos === 0 ? 0 : bytes.readUInt16BE(topicEnd)
  if (qos === 1 && messageId === 0) return undefined
  return { messageId, payload: bytes.subarray(payloadAt, end) }
}
