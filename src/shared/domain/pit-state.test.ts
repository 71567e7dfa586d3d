import { describe, expect, it } from 'vitest'
import { gaugePosition, isAbnormal, outsideBand, pitState } from './pit-state.ts'
import type { PitFacts } from './pit-state.ts'

const band = { bandLowC: 110, bandHighC: 130 }

function facts(change: Partial<PitFacts> = {}): PitFacts {
  return {
    ...band,
    kind: 'offset',
    inUse: true,
    hasProbe: true,
    latest: { c: 121, at: 1000 },
    stale: false,
    ...change,
  }
}

describe('pitState', () => {
  it('is calm within the band, both ends included', () => {
    for (const c of [110, 121, 130]) {
      const state = pitState(facts({ latest: { c, at: 0 } }))
      expect(state).toEqual({ kind: 'in-band', c })
      expect(isAbnormal(state)).toBe(false)
    }
  })

  it('says on which side it left the band and by how much', () => {
    expect(pitState(facts({ latest: { c: 104, at: 0 } }))).toEqual({
      kind: 'below',
      c: 104,
      byC: 6,
      urgency: 'soon',
    })
    expect(pitState(facts({ latest: { c: 150, at: 0 } }))).toEqual({
      kind: 'above',
      c: 150,
      byC: 20,
      urgency: 'now',
    })
  })

  it('turns from soon to now 25 °F outside the band', () => {
    const urgencyAt = (c: number) => {
      const state = pitState(facts({ latest: { c, at: 0 } }))
      return state.kind === 'above' ? state.urgency : state.kind
    }
    expect(urgencyAt(130 + 24.9 / 1.8)).toBe('soon')
    expect(urgencyAt(130 + 25.1 / 1.8)).toBe('now')
  })

  it('is urgent at once when a holding cabinet falls under 135 °F', () => {
    const holding = { kind: 'holding' as const, bandLowC: 58, bandHighC: 70 }
    expect(pitState(facts({ ...holding, latest: { c: 57, at: 0 } }))).toMatchObject({ urgency: 'now' })
    expect(pitState(facts({ ...holding, bandLowC: 62, latest: { c: 60, at: 0 } }))).toMatchObject({
      urgency: 'soon',
    })
  })

  it('does not mind a cold pit with nothing on it', () => {
    expect(pitState(facts({ inUse: false, latest: { c: 18, at: 0 } }))).toEqual({ kind: 'idle', c: 18 })
  })

  it('never shows an old value as present', () => {
    expect(pitState(facts({ stale: true }))).toEqual({ kind: 'silent', lastAt: 1000 })
    expect(pitState(facts({ latest: null }))).toEqual({ kind: 'silent', lastAt: null })
    expect(pitState(facts({ hasProbe: false, latest: null }))).toEqual({ kind: 'no-probe' })
  })
})

describe('outsideBand and gaugePosition', () => {
  it('measures from the nearer end of the band', () => {
    expect(outsideBand(107, band)).toBe(-3)
    expect(outsideBand(133, band)).toBe(3)
    expect(outsideBand(120, band)).toBe(0)
  })

  it('puts the band in the middle third and keeps to the ends', () => {
    expect(gaugePosition(110, band)).toBeCloseTo(1 / 3)
    expect(gaugePosition(120, band)).toBeCloseTo(1 / 2)
    expect(gaugePosition(130, band)).toBeCloseTo(2 / 3)
    expect(gaugePosition(20, band)).toBe(0)
    expect(gaugePosition(400, band)).toBe(1)
  })
})
