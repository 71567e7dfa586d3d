import type { Random } from '../shared/domain/random.ts'

const firstMs = 500
const longestMs = 20_000

/**
 * How long to wait before the next attempt, in milliseconds: doubling from half a second to twenty, with full
 * jitter, so that a house's screens do not all come back in the same instant after the server was away.
 * Method: M. Brooker, "Exponential Backoff and Jitter", 2015 ("full jitter"; from memory).
 */
export function backoffMs(attempt: number, random: Random): number {
  return random.uniform() * Math.min(longestMs, firstMs * 2 ** attempt)
}
