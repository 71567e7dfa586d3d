import { expect, test } from 'vitest'
import { createLargePacks } from './large-packs.ts'

function made(maxBytes = 100) {
  const opened: string[] = []
  const givenUp: string[] = []
  const pressure: boolean[] = []
  const packs = createLargePacks(maxBytes, (on) => pressure.push(on))
  const add = (name: string, bytes: number) =>
    packs.add({ bytes, open: () => opened.push(name), giveUp: () => givenUp.push(name) })
  return { packs, add, opened, givenUp, pressure }
}

test('opens packs in their order, only as many as are wanted', () => {
  const { packs, add, opened } = made()
  for (const name of ['a', 'b', 'c', 'd']) add(name, 10)
  packs.openWhile(() => opened.length < 3)
  expect(opened).toEqual(['a', 'b', 'c'])
  expect(packs.bytes()).toBe(10)
  add('e', 5)
  packs.openWhile(() => true)
  expect(opened).toEqual(['a', 'b', 'c', 'd', 'e'])
  expect(packs.bytes()).toBe(0)
})

test('presses above its bound, and not again until half of it has gone', () => {
  const { packs, add, opened, pressure } = made(100)
  add('a', 60)
  expect(pressure).toEqual([])
  add('b', 50)
  add('c', 10)
  expect(pressure).toEqual([true])
  packs.openWhile(() => opened.length < 1)
  expect(packs.bytes()).toBe(60)
  expect(pressure).toEqual([true])
  packs.openWhile(() => opened.length < 2)
  expect(pressure).toEqual([true, false])
})

test('gives up what waits, and only that', () => {
  const { packs, add, opened, givenUp, pressure } = made(20)
  for (const name of ['a', 'b', 'c']) add(name, 10)
  packs.openWhile(() => opened.length < 1)
  packs.giveUpAll(new Error('stopping'))
  expect(givenUp).toEqual(['b', 'c'])
  expect(packs.bytes()).toBe(0)
  expect(pressure).toEqual([true, false])
})
