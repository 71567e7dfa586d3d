import { describe, expect, it } from 'vitest'
import { minutesFromClock, timeTicks } from './time-axis.ts'

const hour = 3_600_000

function clockOf(timeZone: string) {
  const format = new Intl.DateTimeFormat('en-GB', {
    timeZone,
    hour: '2-digit',
    minute: '2-digit',
    hourCycle: 'h23',
  })
  return (at: number) => format.format(at)
}

function ticksIn(timeZone: string, from: string, hours: number, width: number, leastGap: number) {
  const clock = clockOf(timeZone)
  const start = Date.parse(from)
  const window = { from: start, now: start, to: start + hours * hour }
  const ticks = timeTicks({ window, width, leastGap, minutesOfDay: (at) => minutesFromClock(clock(at)) })
  return ticks.map((tick) => ({ ...tick, clock: clock(tick.at) }))
}

describe('timeTicks', () => {
  it('takes the finest step that leaves room for the labels', () => {
    const ticks = ticksIn('America/Chicago', '2026-12-01T02:10:00Z', 10, 1000, 150)
    expect(ticks.map((tick) => tick.clock)).toEqual(['22:00', '00:00', '02:00', '04:00', '06:00'])
    const gaps = ticks.slice(1).map((tick, i) => tick.x - (ticks[i]?.x ?? 0))
    for (const gap of gaps) expect(gap).toBeCloseTo(200)
    expect(ticks.filter((tick) => tick.midnight).map((tick) => tick.clock)).toEqual(['00:00'])
  })

  it('lets 01:00 stand twice, marked and an hour apart, when the clocks go back', () => {
    // 2026-11-01, America/Chicago: 02:00 CDT becomes 01:00 CST at 07:00 UTC.
    const ticks = ticksIn('America/Chicago', '2026-11-01T04:30:00Z', 6, 600, 60)
    expect(ticks.map((tick) => tick.clock)).toEqual(['00:00', '01:00', '01:00', '02:00', '03:00', '04:00'])
    expect(ticks.map((tick) => tick.twice)).toEqual([false, true, true, false, false, false])
    expect((ticks[2]?.x ?? 0) - (ticks[1]?.x ?? 0)).toBeCloseTo(100)
  })

  it('leaves out the hour that does not exist when the clocks go forward', () => {
    // 2026-03-08, America/Chicago: 02:00 CST becomes 03:00 CDT at 08:00 UTC.
    const ticks = ticksIn('America/Chicago', '2026-03-08T06:00:00Z', 4, 400, 90)
    expect(ticks.map((tick) => tick.clock)).toEqual(['00:00', '01:00', '03:00', '04:00', '05:00'])
    expect(ticks.some((tick) => tick.twice)).toBe(false)
  })

  it('does not take the next day’s same hour for a doubled one', () => {
    const ticks = ticksIn('America/Chicago', '2026-12-01T02:00:00Z', 30, 3000, 90)
    expect(ticks.some((tick) => tick.twice)).toBe(false)
  })

  it('keeps to the zone’s own hours where they are not whole hours of UTC', () => {
    const ticks = ticksIn('Asia/Kathmandu', '2026-12-01T00:00:00Z', 3, 300, 90)
    expect(ticks.map((tick) => tick.clock)).toEqual(['06:00', '07:00', '08:00'])
  })
})
