import type { TimeWindow } from './lane-data.ts'

const minute = 60_000
const quarter = 15 * minute
/** Steps between ticks, in minutes of the site's clock. */
const steps = [15, 30, 60, 120, 180, 360, 720] as const

/** A tick of the shared clock. */
export interface TimeTick {
  at: number
  /** Distance from the left end in px. */
  x: number
  /** The day turns here. */
  midnight: boolean
  /** This clock time stands twice tonight (the clocks go back): its label names the zone. */
  twice: boolean
}

/**
 * Ticks on whole hours (or quarters, or every few hours, as room allows) of the site's clock, placed by elapsed
 * time: on the night the clocks go back 01:00 stands twice, an hour of width apart; when they go forward a tick
 * that does not exist is left out. `minutesOfDay` gives the site's clock at a moment, in minutes since midnight.
 */
export function timeTicks(options: {
  window: TimeWindow
  width: number
  /** Least distance between ticks, px. */
  leastGap: number
  minutesOfDay: (at: number) => number
}): TimeTick[] {
  const { window, width, minutesOfDay } = options
  const perMs = width / (window.to - window.from)
  const step = steps.find((minutes) => minutes * minute * perMs >= options.leastGap) ?? 720
  const ticks: TimeTick[] = []
  const seen = new Map<number, TimeTick>()
  // Zones lie whole quarters of an hour from UTC, so every tick does too.
  for (let at = Math.ceil(window.from / quarter) * quarter; at <= window.to; at += quarter) {
    const clock = minutesOfDay(at)
    if (clock % step !== 0) continue
    const before = seen.get(clock)
    const twice = before !== undefined && at - before.at < 12 * 60 * minute
    if (twice) before.twice = true
    const tick = { at, x: (at - window.from) * perMs, midnight: clock === 0, twice }
    seen.set(clock, tick)
    ticks.push(tick)
  }
  return ticks
}

/** Minutes since midnight from a clock as it is shown, `04:35`. */
export function minutesFromClock(clock: string): number {
  const [hours = 0, minutes = 0] = clock.split(':').map(Number)
  return hours * 60 + minutes
}
