import { describe, expect, it } from 'vitest'
import { forecastPiece } from './forecast.ts'
import type { CookFacts, CookReadings } from './types.ts'

const facts: CookFacts = {
  id: 'fan',
  recipe: 'house-brisket',
  cured: false,
  rawKg: 6.2,
  cookerKind: 'offset',
  pitSetC: 121.1,
  wrapAtC: 74,
  wrapMethod: 'paper',
  pullAtC: 95,
}

describe('the fan', () => {
  const said = forecastPiece(facts, fourHours(), [])

  it('meets the pull temperature where the pull is said to be, within two slices', () => {
    expect(said.pull).not.toBeNull()
    for (const [slow, quantile] of [
      ['p90', 'p10'],
      ['p50', 'p50'],
      ['p10', 'p90'],
    ] as const) {
      const reached = said.fan.find((slice) => slice[slow] >= facts.pullAtC - 0.3)
      expect(Math.abs((reached?.atS ?? 0) - (said.pull?.[quantile] ?? Infinity)), quantile).toBeLessThan(1800)
    }
  })

  it('begins at the core as it is and never has its quantiles out of order', () => {
    expect(said.fan[0]?.p50).toBeCloseTo(60, -1)
    for (const { p10, p25, p50, p75, p90 } of said.fan) {
      expect([p10, p25, p50, p75, p90]).toEqual([p10, p25, p50, p75, p90].sort((a, b) => a - b))
    }
  })
})

/** Four hours of a rise that begins to bend: made up, a reading a minute. */
function fourHours(): CookReadings {
  const minutes = Array.from({ length: 241 }, (_, minute) => minute)
  return {
    elapsedS: Float64Array.from(minutes, (minute) => minute * 60),
    pitC: Float64Array.from(minutes, () => 121),
    coreC: Float64Array.from(minutes, (minute) => 68 - 64 * Math.exp(-minute / 100)),
  }
}
