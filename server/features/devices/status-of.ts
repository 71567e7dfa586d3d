import type { Device, DeviceError, DeviceStatus } from '#shared/contract/device.ts'
import type { ConnectionFacts, ErrorFacts } from './connection-rows.ts'

/**
 * A device's status out of what this server has seen (`now`) and what was written before it started (`then`).
 * Addresses are for those who may manage devices.
 */
export function statusOf(
  device: Device,
  {
    now,
    then,
    error,
  }: {
    now: ConnectionFacts | undefined
    then: ConnectionFacts | undefined
    error: ErrorFacts | undefined
  },
  { withAddresses }: { withAddresses: boolean },
): DeviceStatus {
  const facts = now ?? then
  return {
    deviceId: device.id,
    connection: connectionOf(device, now),
    transport: facts?.transport ?? null,
    since: instant(facts?.sinceMs ?? null),
    until: instant(facts?.endedAtMs ?? null),
    clientId: facts?.clientId ?? null,
    remoteAddress: withAddresses ? (facts?.remoteAddress ?? null) : null,
    messages: facts?.messages ?? 0,
    readings: facts?.readings ?? 0,
    rejected: facts?.rejected ?? 0,
    lastSeenAt: device.lastSeenAt,
    lastError: error ? errorOf(error, withAddresses) : null,
  }
}

/** What is in memory is newer than the device's row by up to half a second. */
function connectionOf({ connection }: Device, now: ConnectionFacts | undefined): Device['connection'] {
  if (!now || now.transport === 'http') return connection
  return now.endedAtMs === null ? 'online' : 'offline'
}

function errorOf(
  { atMs, kind, reason, detail, remoteAddress }: ErrorFacts,
  withAddress: boolean,
): DeviceError {
  return {
    at: new Date(atMs).toISOString(),
    kind,
    reason,
    detail,
    remoteAddress: withAddress ? remoteAddress : null,
  }
}

function instant(ms: number | null): string | null {
  return ms === null ? null : new Date(ms).toISOString()
}
