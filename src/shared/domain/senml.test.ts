import { describe, expect, test } from 'vitest'
import { resolvePack } from './senml.ts'

const now = 1_800_000_000

describe('resolvePack', () => {
  test('counts times below 2^28 from now, forward and back', () => {
    const { records } = resolvePack(
      [
        { n: '1', t: -30, v: 1 },
        { n: '1', t: 2 ** 28 - 1, v: 2 },
        { n: '1', t: 2 ** 28, v: 3 },
        { n: '1', t: 0, v: 4 },
      ],
      now,
    )
    expect(records.map((record) => record.timeMs)).toEqual([
      (now - 30) * 1000,
      (now + 2 ** 28 - 1) * 1000,
      2 ** 28 * 1000,
      now * 1000,
    ])
  })

  test('the sum of base time and time decides whether it is relative', () => {
    const { records } = resolvePack([{ bt: now - 100, n: '1', t: -10, v: 1 }], now)
    expect(records[0]?.timeMs).toBe((now - 110) * 1000)
  })

  test('rounds to the millisecond', () => {
    const { records } = resolvePack([{ n: '1', t: 1_799_999_999.1236, v: 1 }], now)
    expect(records[0]?.timeMs).toBe(1_799_999_999_124)
  })

  test('adds the base value, and a base holds until it is replaced', () => {
    const { records } = resolvePack(
      [
        { bn: 'a', bu: 'Cel', bv: 10 },
        { n: '1', v: 1 },
        { bn: 'b', n: '2', v: 2 },
        { bv: 0, n: '3', u: 'V', v: 3 },
      ],
      now,
    )
    expect(records).toEqual([
      { name: 'a1', unit: 'Cel', value: 11, timeMs: undefined },
      { name: 'b2', unit: 'Cel', value: 12, timeMs: undefined },
      { name: 'b3', unit: 'V', value: 3, timeMs: undefined },
    ])
  })

  test('refuses the whole pack for a label that must be understood', () => {
    const { records, refused } = resolvePack(
      [
        { n: '1', v: 1 },
        { n: '2', v: 2, secret_: 1 },
      ],
      now,
    )
    expect(records).toEqual([])
    expect(refused).toEqual([
      { index: 1, reason: 'unsupported-field', detail: 'the field “secret_” must be understood and is not' },
    ])
  })

  test('ignores other labels it does not know', () => {
    expect(resolvePack([{ n: '1', v: 1, colour: 'red' }], now).refused).toEqual([])
  })

  test('refuses a later version of SenML, takes an earlier one', () => {
    expect(resolvePack([{ bver: 11, n: '1', v: 1 }], now).refused[0]?.reason).toBe('unsupported-field')
    expect(resolvePack([{ bver: 10, n: '1', v: 1 }], now).refused).toEqual([])
    expect(resolvePack([{ bver: 5, n: '1', v: 1 }], now).refused).toEqual([])
  })

  test.each([
    [{ n: '1', vs: 'warm' }, 'a text instead of a number'],
    [{ n: '1', vb: true }, 'a yes or no instead of a number'],
    [{ n: '1', vd: 'aGk=' }, 'data instead of a number'],
    [{ n: '1', s: 5 }, 'no value'],
  ])('refuses %j alone, and keeps its neighbours', (record, words) => {
    const { records, refused } = resolvePack([{ n: '1', v: 1 }, record, { n: '2', v: 2 }], now)
    expect(records.map(({ name }) => name)).toEqual(['1', '2'])
    expect(refused).toEqual([{ index: 1, reason: 'not-a-number', detail: `“1” carries ${words}` }])
  })

  test.each(['', ' 1', '-1', 'a b', 'ä'])('refuses the name “%s”', (name) => {
    expect(resolvePack([{ n: name, v: 1 }], now).refused[0]?.reason).toBe('not-senml')
  })
})
