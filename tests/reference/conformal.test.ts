import { describe, expect, it } from 'vitest'
import { seededRandom } from '#shared/domain/random.ts'
import { conformalBound, pinballLoss } from '#shared/forecast/conformal.ts'

/** Split conformal ranks as in Vovk 2005 and Lei et al. 2018: the ⌈(n+1)(1−α)⌉-th smallest residual. */
describe('split conformal bound', () => {
  it.each([
    { n: 9, rank: 9 },
    { n: 19, rank: 18 },
    { n: 99, rank: 90 },
  ])('takes the $rank-th of $n at α = 0.1', ({ n, rank }) => {
    const residuals = Array.from({ length: n }, (_, i) => ((i * 7) % n) + 1)
    expect([...residuals].sort((a, b) => a - b)).toEqual(Array.from({ length: n }, (_, i) => i + 1))
    expect(conformalBound(residuals, 0.1)).toBe(rank)
  })

  it('is infinite where n is too small', () => {
    expect(conformalBound([1, 2, 3, 4, 5, 6, 7, 8], 0.1)).toBe(Infinity)
  })

  it('refuses an α that is no share', () => {
    expect(() => conformalBound([1], 0)).toThrow(RangeError)
    expect(() => conformalBound([1], 1)).toThrow(RangeError)
  })

  it('holds at least its share of new draws, and not far more', () => {
    const random = seededRandom('conformal')
    let covered = 0
    const rounds = 4000
    for (let round = 0; round < rounds; round++) {
      const bound = conformalBound(
        Array.from({ length: 39 }, () => Math.abs(random.normal())),
        0.2,
      )
      if (Math.abs(random.normal()) <= bound) covered++
    }
    // Exactly 32/40 = 0.8 in theory; four standard errors of 4000 draws are 0.025.
    expect(covered / rounds).toBeGreaterThan(0.775)
    expect(covered / rounds).toBeLessThan(0.825)
  })
})

describe('pinball loss', () => {
  it('is max(τ(y−q), (τ−1)(y−q))', () => {
    expect(pinballLoss(10, 8, 0.9)).toBeCloseTo(1.8)
    expect(pinballLoss(8, 10, 0.9)).toBeCloseTo(0.2)
    expect(pinballLoss(5, 5, 0.3)).toBe(0)
  })

  it('integrates to half the continuous ranked probability score', () => {
    // A forecast uniform on [0, 1] and y = 0.5: CRPS = ∫(F − 1{x ≥ y})² dx = 1/12.
    const steps = 2000
    let sum = 0
    for (let i = 0; i < steps; i++) {
      const tau = (i + 0.5) / steps
      sum += pinballLoss(0.5, tau, tau) / steps
    }
    expect(2 * sum).toBeCloseTo(1 / 12, 5)
  })
})
