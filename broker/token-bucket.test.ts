import { expect, test } from 'vitest'
import { createTokenBucket } from './token-bucket.ts'

const takeAll = (take: () => boolean) => {
  let count = 0
  while (take()) count++
  return count
}

test('a burst at once, then its rate, and a burst again after a silence', () => {
  let ms = 0
  const { take, giveBack } = createTokenBucket(100, 5, () => ms)
  expect(takeAll(take)).toBe(5)
  ms += 10
  expect(takeAll(take)).toBe(1)
  ms += 35
  expect(takeAll(take)).toBe(3)
  ms += 5
  // The half that was left over counts.
  expect(takeAll(take)).toBe(1)
  giveBack()
  expect(takeAll(take)).toBe(1)
  ms += 3_600_000
  expect(takeAll(take)).toBe(5)
})
