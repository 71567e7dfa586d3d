import { describe, expect, it } from 'vitest'
import { leastAhead, nightWindow } from './time-window.ts'

const hour = 3_600_000
const now = Date.parse('2026-12-01T06:10:00Z')

describe('nightWindow', () => {
  it('stands now at two fifths', () => {
    const { from, to } = nightWindow({ now, starts: [now - 3 * hour], ends: [now + 7 * hour] })
    expect((now - from) / (to - from)).toBeCloseTo(0.4)
  })

  it('shows at most 12 h back and 18 h ahead', () => {
    const { from, to } = nightWindow({ now, starts: [now - 40 * hour], ends: [now + 60 * hour] })
    expect(now - from).toBe(12 * hour)
    expect(to - now).toBe(18 * hour)
  })

  it('is narrow when little is left, and never narrower than its least', () => {
    const short = nightWindow({ now, starts: [now - hour], ends: [now + 6 * hour] })
    expect(short.to - now).toBeLessThan(9 * hour)
    expect(short.to).toBeGreaterThan(now + 6 * hour)
    const empty = nightWindow({ now, starts: [], ends: [] })
    expect(empty.to - now).toBe(leastAhead)
  })

  it('shows more than half of the longest cook so far', () => {
    const { from } = nightWindow({ now, starts: [now - 11 * hour], ends: [now + hour] })
    expect(now - from).toBeGreaterThan(5.5 * hour)
  })

  it('does not move with every small change of a forecast', () => {
    const one = nightWindow({ now, starts: [], ends: [now + 6.02 * hour] })
    const other = nightWindow({ now, starts: [], ends: [now + 6.05 * hour] })
    expect(other.to).toBe(one.to)
  })
})
