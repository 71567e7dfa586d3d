import { performance } from 'node:perf_hooks'

/** A rate: so many a second in the long run, and a burst of them after a silence. */
export interface TokenBucket {
  /** Whether one may go now; it has then gone. */
  take: () => boolean
  /** Gives one back that did not go after all. */
  giveBack: () => void
}

export function createTokenBucket(
  perSecond: number,
  burst: number,
  now: () => number = () => performance.now(),
): TokenBucket {
  let tokens = burst
  let filledAt = now()
  return {
    take: () => {
      if (tokens < 1) {
        const present = now()
        tokens = Math.min(burst, tokens + ((present - filledAt) / 1000) * perSecond)
        filledAt = present
        if (tokens < 1) return false
      }
      tokens--
      return true
    },
    giveBack: () => {
      tokens++
    },
  }
}
