import { quantileSorted } from './quantiles.ts'
import { courseStepS, type Futures } from './roll-forward.ts'
import { at } from './small-matrix.ts'
import type { FanSlice, ReachTimes } from './types.ts'

/** A slice each quarter of an hour, unless that would be too many. */
const sliceStepS = 900
const mostSlices = 60

/**
 * The core's coming course: at each quarter of an hour the quantiles of the drawn courses. Each course is stretched in
 * time by what blend and correction made of its pull, so that the fan meets the pull's flags; a course that has
 * arrived stays at the pull temperature.
 *
 * @param rawPull remaining times of the drawn futures, seconds.
 * @param saidPull remaining times as said, seconds.
 */
export function fanOf(
  futures: Futures,
  atS: number,
  pullAtC: number,
  rawPull: ReachTimes,
  saidPull: ReachTimes,
): FanSlice[] {
  const stepS = sliceStepS * Math.max(1, Math.ceil(saidPull.p90 / sliceStepS / mostSlices))
  const slices = Math.ceil(saidPull.p90 / stepS)
  const factors = futures.pullS.map((pullS) => {
    const remaining = Math.max(60, pullS - atS)
    return stretchAt(remaining, rawPull, saidPull)
  })
  const fan: FanSlice[] = []
  const values = new Float64Array(futures.courses.length)
  for (let k = 0; k <= slices; k++) {
    const aheadS = k * stepS
    futures.courses.forEach((course, i) => {
      const ownS = aheadS / at(factors, i)
      const endS = at(futures.pullS, i) - atS
      values[i] = ownS >= endS ? pullAtC : courseAt(course, ownS, pullAtC)
    })
    const sorted = values.slice().sort()
    fan.push({
      atS: atS + aheadS,
      p10: quantileSorted(sorted, 0.1),
      p25: quantileSorted(sorted, 0.25),
      p50: quantileSorted(sorted, 0.5),
      p75: quantileSorted(sorted, 0.75),
      p90: quantileSorted(sorted, 0.9),
    })
  }
  return fan
}

/** By how much a draw with this remaining time is stretched: straight between the quantiles, level beyond. */
function stretchAt(remaining: number, raw: ReachTimes, said: ReachTimes): number {
  const from = [raw.p10, raw.p25, raw.p50, raw.p75, raw.p90]
  const to = [said.p10, said.p25, said.p50, said.p75, said.p90]
  const factor = (i: number) => at(to, i) / Math.max(60, at(from, i))
  if (remaining <= at(from, 0)) return factor(0)
  for (let i = 1; i < from.length; i++) {
    if (remaining <= at(from, i)) {
      const part = (remaining - at(from, i - 1)) / Math.max(1, at(from, i) - at(from, i - 1))
      return (at(to, i - 1) + part * (at(to, i) - at(to, i - 1))) / remaining
    }
  }
  return factor(4)
}

function courseAt(course: Float64Array, aheadS: number, endC: number): number {
  const place = aheadS / courseStepS
  const below = Math.floor(place)
  const low = course[below]
  if (low === undefined) return course[course.length - 1] ?? endC
  const high = course[below + 1] ?? endC
  return Math.min(endC, low + (high - low) * (place - below))
}
