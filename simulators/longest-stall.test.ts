import { expect, it } from 'vitest'

import { longestStall } from './longest-stall.ts'

const ramp = (fromC: number, perHour: number, minutes: number) =>
  Array.from({ length: minutes }, (_, minute) => fromC + (perHour * minute) / 60)

it('finds the flat part of a course and its length', () => {
  const course = [...ramp(40, 15, 120), ...ramp(70, 1, 90), ...ramp(71.5, 12, 90)]
  const stall = longestStall(course)
  expect(stall?.minutes).toBeGreaterThanOrEqual(90)
  expect(stall?.minutes).toBeLessThan(100)
  expect(Math.abs((stall?.fromMinute ?? 0) - 120)).toBeLessThan(8)
})

it('finds none where the core rises steadily, nor in the cold start', () => {
  expect(longestStall(ramp(51, 3, 300))).toBeUndefined()
  expect(longestStall(ramp(4, 0.5, 300))).toBeUndefined()
})
