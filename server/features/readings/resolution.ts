/** Where a line is read from: the readings themselves, their minutes, or their quarters of an hour. */
export type Source = 'readings' | 'minutes' | 'quarters'

/** How a line is drawn. */
export interface Resolution {
  source: Source
  /** Width of a step, ms: one point each. */
  stepMs: number
}

const minuteMs = 60 * 1000
const quarterMs = 15 * minuteMs
/** From here on lines are drawn from a roll-up, in ms. */
const rolledUpFromMs = 3600 * 1000
/**
 * Steps that would be wider than this, in ms, become whole quarters: a week of many lines is then read from a fifteenth
 * of the rows, and still has more points than a screen has room for beside each other.
 */
const widestOfMinutesMs = 5 * minuteMs

/**
 * How a span is drawn with at most so many points: from the readings up to an hour, then in whole minutes, then in whole
 * quarters of an hour, however many of them to a step.
 */
export function resolutionFor(spanMs: number, points: number): Resolution {
  // A span may begin in the middle of a step: one more step than the division says.
  const exactMs = Math.max(1, spanMs / Math.max(1, points - 1))
  if (spanMs <= rolledUpFromMs) return { source: 'readings', stepMs: Math.ceil(exactMs) }
  if (exactMs <= widestOfMinutesMs) return { source: 'minutes', stepMs: roundUp(exactMs, minuteMs) }
  return { source: 'quarters', stepMs: roundUp(exactMs, quarterMs) }
}

function roundUp(ms: number, unitMs: number): number {
  return Math.ceil(ms / unitMs) * unitMs
}
