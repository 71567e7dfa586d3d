import { readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import type { SignedInDevice } from './device.ts'
import type { Gate } from './gate.ts'

/** What is known of one connection. */
export interface Connection {
  gate: Gate
  /** 0: the client asked for none. */
  keepAliveMs: number
  willTopic: string | undefined
  /** Undefined until it has signed in. */
  device: SignedInDevice | undefined
  readingsTopic: string
  statusTopic: string
  /** Counted among the connections of its device. */
  present: boolean
}

export function createConnection(gate: Gate): Connection {
  return {
    gate,
    keepAliveMs: 0,
    willTopic: undefined,
    device: undefined,
    readingsTopic: '',
    statusTopic: '',
    present: false,
  }
}

/** From now on it speaks for a device. */
export function assignDevice(connection: Connection, device: SignedInDevice): void {
  connection.device = device
  connection.readingsTopic = readingsTopic(device.siteSlug, device.deviceSlug)
  connection.statusTopic = statusTopic(device.siteSlug, device.deviceSlug)
}

/** Whether a topic is one that this connection's device may publish to. */
export function isOwnTopic(connection: Connection, topic: string): boolean {
  return topic === connection.readingsTopic || topic === connection.statusTopic
}

/** Whether a topic filter reaches nothing but the device's own topics. */
export function isOwnFilter(connection: Connection, filter: string): boolean {
  if (!connection.device) return false
  const below = connection.statusTopic.slice(0, -'status'.length)
  return isOwnTopic(connection, filter) || filter === `${below}#` || filter === `${below}+`
}
