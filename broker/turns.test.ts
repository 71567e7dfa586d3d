import { afterEach, beforeEach, expect, test, vi } from 'vitest'
import { createTokenBucket } from './token-bucket.ts'
import { createTurns } from './turns.ts'

beforeEach(() => {
  vi.useFakeTimers()
})
afterEach(() => {
  vi.useRealTimers()
})

function line(perSecond: number, burst: number) {
  let nowMs = 0
  const turns = createTurns(createTokenBucket(perSecond, burst, () => nowMs))
  const gone: number[] = []
  return {
    gone,
    turns,
    come: (number: number) => turns.wait(() => gone.push(number)),
    pass: (ms: number) => {
      for (let at = 0; at < ms; at += 10) {
        nowMs += 10
        vi.advanceTimersByTime(10)
      }
    },
  }
}

test('lets a burst go at once, the others at the rate, in the order in which they came', () => {
  const { gone, come, pass } = line(100, 3)
  for (let number = 0; number < 10; number++) come(number)
  expect(gone).toEqual([0, 1, 2])
  pass(30)
  expect(gone).toEqual([0, 1, 2, 3, 4, 5])
  pass(40)
  expect(gone).toEqual([0, 1, 2, 3, 4, 5, 6, 7, 8, 9])
})

test('who comes while others wait goes after them', () => {
  const { gone, come, pass } = line(100, 1)
  come(0)
  come(1)
  pass(10)
  come(2)
  expect(gone).toEqual([0, 1])
  pass(10)
  expect(gone).toEqual([0, 1, 2])
})

test('stopped, nobody goes any more', () => {
  const { gone, come, pass, turns } = line(100, 1)
  come(0)
  come(1)
  turns.stop()
  come(2)
  pass(100)
  expect(gone).toEqual([0])
})
