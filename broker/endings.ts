import type { Connection } from './connection.ts'
import type { Ending, Trouble } from './device.ts'
import type { Gate } from './gate.ts'
import type { BrokerLimits } from './limits.ts'

/**
 * Why a connection ended, if that is to be told.
 * @param error what its stream was closed for
 */
export function troubleOf(
  connection: Connection,
  error: Error | null,
  limits: BrokerLimits,
): Trouble | undefined {
  const { device, gate, origin, ending = endingOf(error, gate) } = connection
  if (!device || ending === 'told') return undefined
  const detail = ending === 'malformed' && error ? error.message : endingWords(ending, connection, limits)
  return { device, kind: ending, detail, remoteAddress: origin.remoteAddress }
}

/** What a connection may be silent for, times one and a half, in ms (MQTT 3.1.1, section 3.1.2.10). */
export function patienceWith({ keepAliveMs }: Connection, { maxKeepAliveMs }: BrokerLimits): number {
  return keepAliveMs > 0 ? Math.min(keepAliveMs, maxKeepAliveMs) : maxKeepAliveMs
}

/** Why a connection ended, when nothing of ours ended it. */
function endingOf(error: Error | null, gate: Gate): Ending | 'told' {
  // The library's words for a client that did not read for a minute.
  if (error?.message === 'drain timeout') return 'not-reading'
  if (error) return 'malformed'
  return gate.saidGoodbye() ? 'told' : 'lost'
}

function endingWords(kind: Ending, connection: Connection, limits: BrokerLimits): string {
  const words: Record<Ending, string> = {
    malformed: 'it sent what is not MQTT',
    lost: 'the connection broke off without a DISCONNECT',
    silent: `nothing was heard for ${(1.5 * patienceWith(connection, limits)) / 1000} s`,
    'not-reading': 'it does not read what it has subscribed to',
    'taken-over': `another connection came with the same client id, “${connection.clientId}”`,
    'too-many-connections': `it had more than ${limits.maxConnectionsPerDevice} connections; the oldest was closed`,
    'secret-ended': 'the secret that it was connected with has ended',
  }
  return words[kind]
}
