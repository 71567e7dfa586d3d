import { median } from 'simple-statistics'
const windowS = 300
const standingS = 180

/** Tells when temperatures count as reached, reading by reading. */
export interface ReachRule {
  /** Adds a reading, time in seconds and not before the last one, °C; NaN is a missing value. */
  add(elapsedS: number, coreC: number): void
  /** For each target the time at which it counted as reached, in seconds, or undefined. */
  readonly reachedS: (number | undefined)[]
}

/**
 * The product's rule for "reached": the median of the last five minutes' readings has stood at or above the
 * target for three minutes. A single spike or a short flutter never counts; a repeated row counts once.
 */
export function createReachRule(targetsC: readonly number[]): ReachRule {
  const times: number[] = []
  const values: number[] = []
  const reachedS: (number | undefined)[] = targetsC.map(() => undefined)
  const standingSince: (number | undefined)[] = targetsC.map(() => undefined)
  const above = targetsC.map(() => 0)
  let newest = -Infinity
  return {
    reachedS,
    add: (elapsedS, coreC) => {
      if (!Number.isFinite(coreC) || elapsedS <= newest) return
      newest = elapsedS
      times.push(elapsedS)
      values.push(coreC)
      targetsC.forEach((target, i) => {
        if (coreC >= target) above[i] = (above[i] ?? 0) + 1
      })
      while ((times[0] ?? elapsedS) <= elapsedS - windowS) {
        times.shift()
        const gone = values.shift() ?? Number.NaN
        targetsC.forEach((target, i) => {
          if (gone >= target) above[i] = (above[i] ?? 0) - 1
        })
      }
      targetsC.forEach((target, i) => {
        if (reachedS[i] !== undefined) return
        // The median is worked out only where at least half of the readings make it possible.
        if ((above[i] ?? 0) * 2 < values.length || medianOf(values) < target) {
          standingSince[i] = undefined
          return
        }
        const since = (standingSince[i] ??= elapsedS)
        if (elapsedS - since >= standingS) reachedS[i] = elapsedS
      })
    },
  }
}

/** The middle value of a short list; the mean of the two middle ones where their number is even. */
export function medianOf(values: ArrayLike<number>): number {
  return values.length === 0 ? Number.NaN : median(Array.from(values))
}
