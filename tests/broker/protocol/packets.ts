import type {
  IConnectPacket,
  IPublishPacket,
  ISubscribePacket,
  IUnsubscribePacket,
  Packet,
} from 'mqtt-packet'

type QoS = 0 | 1 | 2

/** CONNECT of MQTT 3.1.1; clean, without keep-alive and without credentials unless they are given. */
export function connectPacket(options: Omit<Partial<IConnectPacket>, 'cmd'> = {}): IConnectPacket {
  return {
    cmd: 'connect',
    protocolId: 'MQTT',
    protocolVersion: 4,
    clean: true,
    clientId: 'box',
    keepalive: 0,
    ...options,
  }
}

/** PUBLISH; a `messageId` belongs to QoS 1 and 2. */
export function publishPacket(
  topic: string,
  payload: string | Buffer,
  options: { qos?: QoS; messageId?: number; dup?: boolean; retain?: boolean } = {},
): IPublishPacket {
  return { cmd: 'publish', topic, payload, qos: 0, dup: false, retain: false, ...options }
}

export function subscribePacket(
  messageId: number,
  ...filters: [topic: string, qos: QoS][]
): ISubscribePacket {
  return { cmd: 'subscribe', messageId, subscriptions: filters.map(([topic, qos]) => ({ topic, qos })) }
}

export function unsubscribePacket(messageId: number, ...filters: string[]): IUnsubscribePacket {
  return { cmd: 'unsubscribe', messageId, unsubscriptions: filters }
}

/** An acknowledgement of any kind. */
export function ackPacket(cmd: 'puback' | 'pubrec' | 'pubrel' | 'pubcomp', messageId: number): Packet {
  return { cmd, messageId }
}

export const pingRequest = Buffer.from([0xc0, 0])
export const disconnect = Buffer.from([0xe0, 0])

/** A packet by hand: its first byte, its remaining length, and its parts as they are. */
export function rawPacket(firstByte: number, ...parts: Uint8Array[]): Buffer {
  const body = Buffer.concat(parts)
  return Buffer.concat([Buffer.from([firstByte, ...remainingLength(body.length)]), body])
}

/** A text field: two bytes of length, then its bytes, well-formed or not. */
export function field(content: string | Uint8Array | number[]): Buffer {
  const bytes = typeof content === 'string' ? Buffer.from(content) : Buffer.from(content)
  return Buffer.concat([number16(bytes.length), bytes])
}

export function number16(value: number): Buffer {
  return Buffer.from([value >> 8, value & 255])
}

/** The flags of CONNECT (MQTT 3.1.1, figure 3.4). */
export const connectFlag = {
  reserved: 1,
  clean: 2,
  will: 4,
  willQos: (qos: number) => qos << 3,
  willRetain: 32,
  password: 64,
  username: 128,
} as const

/** CONNECT by hand, with a payload of fields as they are. */
export function rawConnect(options: {
  protocol?: string
  level?: number
  flags: number
  keepAlive?: number
  fields: Uint8Array[]
}): Buffer {
  const { protocol = 'MQTT', level = 4, flags, keepAlive = 0, fields } = options
  return rawPacket(0x10, field(protocol), Buffer.from([level, flags]), number16(keepAlive), ...fields)
}

/** PUBLISH at QoS 1 by hand, with a topic that need not be text. */
export function rawPublish(topic: string | number[], messageId: number, payload = 'x'): Buffer {
  return rawPacket(0x32, field(topic), number16(messageId), Buffer.from(payload))
}

/** A length in base 128, the least part first (MQTT 3.1.1, section 2.2.3). */
function remainingLength(length: number): number[] {
  return length < 128 ? [length] : [(length % 128) + 128, ...remainingLength(Math.floor(length / 128))]
}
