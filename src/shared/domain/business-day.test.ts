import { describe, expect, it } from 'vitest'
import { businessDay } from './business-day.ts'

describe('businessDay', () => {
  it.each([
    ['2026-12-01T17:00:00Z', 'America/Chicago', '2026-12-01'],
    ['2026-12-01T09:30:00Z', 'America/Chicago', '2026-11-30'],
    ['2026-12-01T10:59:59Z', 'America/Chicago', '2026-11-30'],
    ['2026-12-01T11:00:00Z', 'America/Chicago', '2026-12-01'],
    ['2027-01-01T08:00:00Z', 'America/Chicago', '2026-12-31'],
    ['2026-12-01T03:00:00Z', 'Pacific/Auckland', '2026-12-01'],
    // The night the clocks go back: 04:30 by the wall is still the night before.
    ['2026-11-01T10:30:00Z', 'America/Chicago', '2026-10-31'],
    ['2026-11-01T11:00:00Z', 'America/Chicago', '2026-11-01'],
    ['2026-07-01T09:59:00Z', 'America/Chicago', '2026-06-30'],
    ['2026-07-01T10:00:00Z', 'America/Chicago', '2026-07-01'],
  ])('%s in %s is %s', (at, zone, day) => {
    expect(businessDay(Date.parse(at), zone)).toBe(day)
  })

  it('refuses a zone that does not exist', () => {
    expect(() => businessDay(0, 'Mars/Olympus')).toThrow(RangeError)
  })
})
