import { performance } from 'node:perf_hooks'
import type { Logger } from 'pino'
import { z } from 'zod'
import { isDatabaseAway } from '../db/database-away.ts'

export interface Retry {
  /** Tries until it works; what cannot get better by waiting is thrown, and everything once stopped. */
  until<T>(attempt: () => Promise<T>): Promise<T>
  /** Whether the last attempt worked. */
  ok(): boolean
  /** Ends all waiting: what is tried now is tried once more and then thrown. */
  stop(): void
  stopped(): boolean
}

const firstPauseMs = 50
const longestPauseMs = 2000

/** Repeats what fails because the database is away, with growing pauses, and tells once of each outage. */
export function createRetry({ log, waiting }: { log: Logger; waiting: () => number }): Retry {
  let failingSince: number | undefined
  let stopped = false
  let wakeUp: (() => void) | undefined

  const pause = (ms: number) =>
    new Promise<void>((resolve) => {
      const timer = setTimeout(resolve, ms)
      wakeUp = () => {
        clearTimeout(timer)
        resolve()
      }
    })

  return {
    until: async (attempt) => {
      for (let pauseMs = firstPauseMs; ; pauseMs = Math.min(longestPauseMs, pauseMs * 2)) {
        try {
          const result = await attempt()
          if (failingSince !== undefined) {
            const seconds = Math.round((performance.now() - failingSince) / 1000)
            log.info({ seconds, waiting: waiting() }, 'Readings are being stored again')
            failingSince = undefined
          }
          return result
        } catch (error) {
          if (stopped || !isPassing(error)) throw error
          if (failingSince === undefined) {
            failingSince = performance.now()
            log.warn({ err: error, waiting: waiting() }, 'Readings cannot be stored just now; they wait')
          }
          await pause(pauseMs)
        }
      }
    },
    ok: () => failingSince === undefined,
    stop: () => {
      stopped = true
      wakeUp?.()
    },
    stopped: () => stopped,
  }
}

const Coded = z.object({ code: z.string() })

/**
 * Whether the same statement may work later: the database is away, or it gave up for a reason outside the statement
 * (SQLSTATE classes 40 rollback, 53 resources, 55 not in that state, 57 intervention, 58 system, and 25006: a standby).
 */
function isPassing(error: unknown): boolean {
  if (isDatabaseAway(error)) return true
  const coded = Coded.safeParse(error)
  return coded.success && /^(40|53|55|57|58)...$|^25006$/.test(coded.data.code)
}
