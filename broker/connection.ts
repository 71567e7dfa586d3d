import { readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import type { DeviceStatus, Ending, LiveConnection, Origin, SignedInDevice } from './device.ts'
import type { Gate } from './gate.ts'

/** What is known of one connection. */
export interface Connection {
  gate: Gate
  origin: Origin
  /** As the device gave it. */
  clientId: string
  /** The same with the device's name before it: what the library knows it by. */
  sessionId: string
  /** It asked for a kept session without a client id. */
  isNameless: boolean
  /** 0: the client asked for none. */
  keepAliveMs: number
  will: { topic: string; bytes: number } | undefined
  /** Undefined until it has signed in. */
  device: SignedInDevice | undefined
  readingsTopic: string
  statusTopic: string
  /** Counted among the connections of its device. */
  present: boolean
  /** What it said last about its device. */
  toldStatus: DeviceStatus | undefined
  /** Why it is being closed; `told`: whoever has to know knows already. */
  ending: Ending | 'told' | undefined
}

export function createConnection(gate: Gate, origin: Origin): Connection {
  return {
    gate,
    origin,
    clientId: '',
    sessionId: '',
    isNameless: false,
    keepAliveMs: 0,
    will: undefined,
    device: undefined,
    readingsTopic: '',
    statusTopic: '',
    present: false,
    toldStatus: undefined,
    ending: undefined,
  }
}

/** What others are told of a connection that has signed in. */
export function liveConnection(
  { origin, clientId }: Pick<Connection, 'origin' | 'clientId'>,
  device: SignedInDevice,
): LiveConnection {
  return { ...origin, clientId, device }
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
