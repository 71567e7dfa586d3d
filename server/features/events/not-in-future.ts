import type { Clock } from '#shared/domain/clock.ts'
import { unprocessable } from '../../http/problem.ts'

/** How far a phone's clock may be ahead of the server's. */
const aheadMs = 2 * 60_000

/**
 * Refuses what is said to have happened in the future: the log says what was, the plan says what will be.
 * @param happenedAt RFC 3339
 * @returns the moment in ms since 1970 UTC
 * @throws HttpProblem 422 beyond two minutes ahead
 */
export function notInFuture(happenedAt: string, clock: Clock, at: string): number {
  const ms = Date.parse(happenedAt)
  if (ms <= clock.now() + aheadMs) return ms
  const message = 'That time is still to come. Log what has happened; check the clock of this device.'
  throw unprocessable(message, [{ at, message }])
}
