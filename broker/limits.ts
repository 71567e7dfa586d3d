import { maxPayloadBytes } from '#shared/contract/mqtt.ts'
import type { GateLimits } from './gate.ts'

export interface BrokerLimits extends GateLimits {
  /** PUBLISH packets at QoS 0 a second of all clients together. */
  unacknowledgedPerSecond: number
  maxConnections: number
  /** Time for CONNECT to arrive, in ms. */
  connectTimeoutMs: number
}

export const usualLimits: BrokerLimits = {
  maxPacketBytes: maxPayloadBytes,
  maxHeldBytes: 1024 * 1024,
  minHeldBytes: 2 * maxPayloadBytes,
  maxHeldTogether: 64 * 1024 * 1024,
  maxInFlight: 512,
  packetsPerSecond: 5000,
  burst: 10_000,
  unacknowledgedPerSecond: 10_000,
  maxConnections: 5000,
  connectTimeoutMs: 10_000,
}
