import { maxPayloadBytes } from '#shared/contract/mqtt.ts'
import type { GateLimits } from './gate.ts'

/** What the broker bounds; why, for each, stands in docs/mqtt.md. */
export interface BrokerLimits extends GateLimits {
  /** PUBLISH packets at QoS 0 a second of all clients together. */
  unacknowledgedPerSecond: number
  maxConnections: number
  /** Connections of one device; one more closes the oldest. */
  maxConnectionsPerDevice: number
  /** CONNECT packets let through a second in the long run, and at once after a rest; the others wait their turn. */
  connectsPerSecond: number
  connectBurst: number
  /** Silence is heard out for one and a half of this at most, in ms, also where a device asks for more or for none. */
  maxKeepAliveMs: number
  /** Of a client id, in bytes. */
  maxClientIdBytes: number
  /** Of what is kept for later, a last will or a retained status, in bytes. */
  maxKeptBytes: number
  /** What may wait to be read by a device that has subscribed, in bytes; beyond it is cut off. */
  maxUnreadBytes: number
  /** For so long its device may not subscribe again, in ms. */
  deafForMs: number
  /** Sessions of one device that outlive their connections. */
  maxKeptSessions: number
  /** Messages, and their bytes, that wait for a session that is away. */
  maxWaiting: number
  maxWaitingBytes: number
}

export const usualLimits: BrokerLimits = {
  maxPacketBytes: maxPayloadBytes,
  maxHeldBytes: 1024 * 1024,
  minHeldBytes: 2 * maxPayloadBytes,
  maxHeldTogether: 64 * 1024 * 1024,
  maxInFlight: 512,
  largeBytes: 4096,
  maxLargeInFlight: 2,
  packetsPerSecond: 5000,
  burst: 10_000,
  unacknowledgedPerSecond: 10_000,
  connectTimeoutMs: 5_000,
  maxConnections: 5000,
  maxConnectionsPerDevice: 8,
  connectsPerSecond: 500,
  connectBurst: 100,
  maxKeepAliveMs: 3_600_000,
  maxClientIdBytes: 256,
  maxKeptBytes: 1024,
  maxUnreadBytes: 1024 * 1024,
  deafForMs: 60_000,
  maxKeptSessions: 8,
  maxWaiting: 1000,
  maxWaitingBytes: 1024 * 1024,
}
