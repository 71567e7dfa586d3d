import { expect, it } from 'vitest'
import { seededRandom } from '@/shared/domain/random.ts'
import { backoffMs } from './live-backoff.ts'

const always = (value: number) => ({ uniform: () => value, normal: () => 0 })

it('doubles the longest wait from half a second to twenty and stays there', () => {
  const longest = [0, 1, 2, 3, 4, 5, 6, 30].map((attempt) => backoffMs(attempt, always(1)))
  expect(longest).toEqual([500, 1000, 2000, 4000, 8000, 16_000, 20_000, 20_000])
})

it('draws from nothing to the longest, so that screens do not come back together', () => {
  const random = seededRandom('backoff')
  const waits = Array.from({ length: 2000 }, () => backoffMs(10, random))
  expect(Math.min(...waits)).toBeLessThan(200)
  expect(Math.max(...waits)).toBeGreaterThan(19_800)
  expect(waits.reduce((sum, wait) => sum + wait, 0) / waits.length / 10_000).toBeCloseTo(1, 1)
})
