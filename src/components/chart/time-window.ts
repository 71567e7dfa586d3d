import type { TimeWindow } from './lane-data.ts'

const hour = 3_600_000

/** Where the now line stands: two fifths of the width, so that more of the night ahead is seen than of the past. */
export const nowShare = 2 / 5

/** Right of the last thing to come there must be room for its flag. */
const roomForFlags = 1.25
/** Of the longest cook so far at least this share is shown: what is to come matters more than what was. */
const pastWanted = 0.6

/** The axis never shows more than this, nor less. */
export const mostAhead = 18 * hour
export const leastAhead = 4.5 * hour

/**
 * The span of the shared clock: from at most 12 h back to 18 h ahead, narrower when the night allows, with now
 * always at two fifths. It follows the latest thing to come and the longest cook so far, and grows and shrinks in whole half hours so that it does not breathe with every forecast.
 */
export function nightWindow(night: {
  now: number
  /** When the pieces on the cookers went on. */
  starts: readonly number[]
  /** Late ends of forecasts, service hours and whatever else is to come. */
  ends: readonly number[]
}): TimeWindow {
  const { now } = night
  const back = Math.max(0, ...night.starts.map((at) => now - at))
  const ahead = Math.max(0, ...night.ends.map((at) => at - now))
  const needed = Math.max(ahead * roomForFlags, (back * pastWanted * (1 - nowShare)) / nowShare)
  const rounded = Math.ceil(needed / (hour / 2)) * (hour / 2)
  const shown = Math.min(mostAhead, Math.max(leastAhead, rounded))
  return { now, from: now - (shown * nowShare) / (1 - nowShare), to: now + shown }
}
