import { expect, test } from 'vitest'
import { createGatheredChanges } from './gathered-changes.ts'

test('readings of a channel come in order of time, whatever order they came in', () => {
  const gathered = createGatheredChanges()
  gathered.add({
    readings: [
      [1, 300, 3],
      [2, 100, 9],
    ],
  })
  gathered.add({
    readings: [
      [1, 100, 1],
      [1, 200, 2],
    ],
  })
  expect(gathered.take()).toEqual({
    readings: [
      [1, 100, 1],
      [1, 200, 2],
      [1, 300, 3],
      [2, 100, 9],
    ],
  })
})

test('of a pack of old readings only the newest ten of a channel', () => {
  const gathered = createGatheredChanges()
  for (let at = 1; at <= 500; at++) gathered.add({ readings: [[1, at, at]] })
  gathered.add({ readings: [[1, 3, 3]] })
  expect(gathered.take().readings?.map(([, at]) => at)).toEqual([
    491, 492, 493, 494, 495, 496, 497, 498, 499, 500,
  ])
})

test('a thing is sent once, as it is last', () => {
  const gathered = createGatheredChanges()
  const service = {
    id: 4,
    site: 'a',
    date: '2026-12-01',
    servesAt: '2026-12-01T17:00:00Z',
    portions: 1,
    note: null,
  }
  gathered.add({ services: [service] })
  gathered.add({ services: [{ ...service, portions: 2 }] })
  expect(gathered.take()).toEqual({ services: [{ ...service, portions: 2 }] })
})

test('empty until something is added, and again after it was taken', () => {
  const gathered = createGatheredChanges()
  expect(gathered.isEmpty()).toBe(true)
  gathered.add({ readings: [] })
  expect(gathered.isEmpty()).toBe(true)
  gathered.add({ readings: [[1, 1, 1]] })
  expect(gathered.isEmpty()).toBe(false)
  gathered.take()
  expect(gathered.isEmpty()).toBe(true)
  expect(gathered.take()).toEqual({})
})
