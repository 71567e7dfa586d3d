/** A PUBLISH at QoS 1 that is written once and then only patched, so that making it costs next to nothing. */
export interface PacketMaker {
  /** Bytes of one packet; all have the same. */
  size: number
  /** Writes the next packet into a buffer. @param messageId 1 to 65535 @param nowMs the present, in ms since 1970 UTC */
  write: (into: Buffer, at: number, messageId: number, nowMs: number) => void
}

const channels = 6

/** CONNECT of MQTT 3.1.1 (section 3.1): clean session, user name and password, a minute of keep-alive. */
export function connectPacket(clientId: string, username: string, password: string): Buffer {
  const head = Buffer.from([0, 4, 0x4d, 0x51, 0x54, 0x54, 4, 0b1100_0010, 0, 60])
  const body = Buffer.concat([head, text(clientId), text(username), text(password)])
  return Buffer.concat([fixedHeader(0x10, body.length), body])
}

/**
 * Packs of one or of six readings (SenML): one a message names its channel in turn, six have one each of every channel.
 * No two readings of a channel have the same time.
 */
export function createPacketMaker(topic: string, readings: 1 | 6): PacketMaker {
  const time = '1700000000.000'
  const payload = Buffer.from(
    readings === 1
      ? `[{"n":"1","u":"Cel","v":93.25,"t":${time}}]`
      : `[{"bn":"","bt":${time},"bu":"Cel","n":"1","v":93.25},${[2, 3, 4, 5, 6]
          .map((channel) => `{"n":"${channel}","v":9${channel}.25}`)
          .join(',')}]`,
  )
  const topicField = text(topic)
  const rest = Buffer.concat([topicField, Buffer.from([0, 0]), payload])
  const template = Buffer.concat([fixedHeader(0x32, rest.length), rest])
  const payloadAt = template.length - payload.length
  const idAt = payloadAt - 2
  const timeAt = payloadAt + payload.indexOf(time)
  const channelAt = payloadAt + payload.indexOf('"n":"1"') + 5
  const hundredthsAt = payloadAt + payload.indexOf('.25') + 1

  let channel = 0
  let timeMs = 0
  return {
    size: template.length,
    write: (into, at, messageId, nowMs) => {
      template.copy(into, at)
      into[at + idAt] = messageId >> 8
      into[at + idAt + 1] = messageId & 255
      if (readings === 6 || channel === channels) channel = 0
      if (channel === 0) timeMs = Math.max(timeMs + 1, nowMs)
      if (readings === 1) into[at + channelAt] = 0x31 + channel++
      writeDigits(into, at + timeAt, Math.floor(timeMs / 1000), 10)
      writeDigits(into, at + timeAt + 11, timeMs % 1000, 3)
      writeDigits(into, at + hundredthsAt, messageId % 100, 2)
    },
  }
}

function writeDigits(into: Buffer, at: number, value: number, digits: number): void {
  for (let place = digits - 1, rest = value; place >= 0; place--) {
    into[at + place] = 0x30 + (rest % 10)
    rest = Math.floor(rest / 10)
  }
}

/** A string with its length in front (section 1.5.3). */
function text(value: string): Buffer {
  const bytes = Buffer.from(value)
  return Buffer.concat([Buffer.from([bytes.length >> 8, bytes.length & 255]), bytes])
}

/** First byte and remaining length (section 2.2.3). */
function fixedHeader(firstByte: number, length: number): Buffer {
  const bytes = [firstByte]
  for (let rest = length; ; rest >>= 7) {
    bytes.push(rest > 127 ? (rest & 127) | 128 : rest)
    if (rest <= 127) return Buffer.from(bytes)
  }
}
