import { describe, expect, it } from 'vitest'
import { nearestClock } from './nearest-clock.ts'

const format = new Intl.DateTimeFormat('en-GB', {
  timeZone: 'America/Chicago',
  hour: '2-digit',
  minute: '2-digit',
  hourCycle: 'h23',
})
const clockOf = (at: number) => format.format(at)
const at = (instant: string) => Date.parse(instant)

describe('nearestClock', () => {
  // 01:10 in Chicago.
  const now = at('2026-12-02T07:10:30Z')

  it('takes an evening’s time for the evening before', () => {
    expect(nearestClock('23:50', { reference: now, notAfter: now, clockOf })).toBe(at('2026-12-02T05:50:00Z'))
  })

  it('never gives a time that is still to come', () => {
    expect(nearestClock('01:15', { reference: now, notAfter: now, clockOf })).toBe(at('2026-12-01T07:15:00Z'))
  })

  it('corrects an old entry near to where it was, not near to now', () => {
    const reference = at('2026-11-20T06:00:00Z')
    expect(nearestClock('00:20', { reference, notAfter: now, clockOf })).toBe(at('2026-11-20T06:20:00Z'))
  })

  it('takes the nearer of the two when the hour stands twice', () => {
    // 2026-11-01: 01:30 CDT is 06:30 UTC, 01:30 CST is 07:30 UTC.
    const late = at('2026-11-01T08:00:00Z')
    expect(nearestClock('01:30', { reference: late, notAfter: late, clockOf })).toBe(
      at('2026-11-01T07:30:00Z'),
    )
  })

  it('knows that some times do not exist on the night the clocks go forward', () => {
    const reference = at('2026-03-08T08:30:00Z')
    const found = nearestClock('02:30', { reference, notAfter: reference, clockOf })
    // 02:30 did not exist that night: the nearest one is the day before.
    expect(found).toBe(at('2026-03-07T08:30:00Z'))
  })

  it('has no answer to what is not a clock', () => {
    expect(nearestClock('', { reference: now, notAfter: now, clockOf })).toBeUndefined()
    expect(nearestClock('25:00', { reference: now, notAfter: now, clockOf })).toBeUndefined()
  })
})
