import { at } from './small-matrix.ts'
import type { ReachTimes } from './types.ts'

/**
 * A quantile of sorted values by straight interpolation (Hyndman and Fan's type 7, from memory). Infinite values are
 * allowed at the end.
 */
export function quantileSorted(sorted: Float64Array, share: number): number {
  const place = share * (sorted.length - 1)
  const below = Math.floor(place)
  const low = at(sorted, below)
  const high = at(sorted, Math.min(sorted.length - 1, below + 1))
  return low === high || place === below ? low : low + (high - low) * (place - below)
}

/** The five quantiles the product speaks in. */
export function fiveQuantiles(values: Float64Array): ReachTimes {
  const sorted = values.slice().sort()
  return {
    p10: quantileSorted(sorted, 0.1),
    p25: quantileSorted(sorted, 0.25),
    p50: quantileSorted(sorted, 0.5),
    p75: quantileSorted(sorted, 0.75),
    p90: quantileSorted(sorted, 0.9),
  }
}
