import { expect, test } from 'vitest'
import { createDelayWindow } from './delay-window.ts'

test('quantiles within a step of five per cent', () => {
  const window = createDelayWindow(() => 0)
  for (let ms = 1; ms <= 1000; ms++) window.add(ms)
  expect(window.quantile(0.5)).toBeGreaterThanOrEqual(500)
  expect(window.quantile(0.5)).toBeLessThan(500 * 1.06)
  expect(window.quantile(0.99)).toBeGreaterThanOrEqual(990)
  expect(window.quantile(0.99)).toBeLessThan(990 * 1.06)
})

test('counts weigh', () => {
  const window = createDelayWindow(() => 0)
  window.add(1, 99)
  window.add(100, 1)
  expect(window.quantile(0.5)).toBeLessThan(1.1)
  expect(window.quantile(1)).toBeGreaterThanOrEqual(100)
})

test('nothing is null, and a minute later it is nothing again', () => {
  let now = 5_000
  const window = createDelayWindow(() => now)
  expect(window.quantile(0.5)).toBeNull()
  window.add(10)
  now += 59_000
  expect(window.quantile(0.5)).not.toBeNull()
  now += 2_000
  expect(window.quantile(0.5)).toBeNull()
})

test('a slot of an hour ago does not count when its second comes round again', () => {
  let now = 0
  const window = createDelayWindow(() => now)
  window.add(1000, 50)
  now += 3_600_000
  window.add(1)
  expect(window.quantile(1)).toBeLessThan(2)
})
