/** A stretch in which the core hardly rose. */
export interface Stall {
  fromMinute: number
  minutes: number
}

/**
 * The longest stall in a course of core temperatures without noise, °C, one value a minute: the longest stretch in
 * which no half hour brought a degree, that is less than 2 °C an hour for at least 30 min, above 50 °C.
 * Undefined when there is none.
 */
export function longestStall(coreC: readonly number[]): Stall | undefined {
  let longest: Stall | undefined
  let fromMinute: number | undefined
  for (let minute = 0; minute + WINDOW <= coreC.length; minute++) {
    const start = coreC[minute] ?? NaN
    const end = coreC[minute + WINDOW]
    const stalled = end !== undefined && start > 50 && end - start < SLOW_C
    if (stalled) {
      fromMinute ??= minute
      const minutes = minute + WINDOW - fromMinute
      if (longest === undefined || minutes > longest.minutes) longest = { fromMinute, minutes }
    } else {
      fromMinute = undefined
    }
  }
  return longest
}

const WINDOW = 30
const SLOW_C = 1
