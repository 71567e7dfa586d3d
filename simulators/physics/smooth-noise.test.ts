import { expect, it } from 'vitest'

import { smoothNoise } from './smooth-noise.ts'

const PERIOD_MS = 60_000

it('has mean 0 and standard deviation 1 everywhere between its knots', () => {
  const noise = smoothNoise('a', PERIOD_MS)
  for (const share of [0, 0.25, 0.5, 0.8]) {
    const values = Array.from({ length: 4000 }, (_, index) => noise((index + share) * PERIOD_MS))
    const mean = values.reduce((sum, value) => sum + value, 0) / values.length
    const variance = values.reduce((sum, value) => sum + (value - mean) ** 2, 0) / values.length
    expect(Math.abs(mean)).toBeLessThan(0.08)
    expect(Math.abs(Math.sqrt(variance) - 1)).toBeLessThan(0.05)
  }
})

it('is smooth, and the same from wherever it is begun', () => {
  const noise = smoothNoise('b', PERIOD_MS)
  const late = smoothNoise('b', PERIOD_MS)
  let before = noise(0)
  for (let atMs = 500; atMs < 50 * PERIOD_MS; atMs += 500) {
    const value = noise(atMs)
    expect(Math.abs(value - before)).toBeLessThan(0.12)
    before = value
  }
  expect(late(37.3 * PERIOD_MS)).toBe(noise(37.3 * PERIOD_MS))
})
