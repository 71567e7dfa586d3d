import { describe, expect, test } from 'vitest'
import { inSequence, traceOf } from './trace.ts'

const point = (atMs: number, celsius: number) => ({ atMs, celsius, low: celsius - 1, high: celsius + 1 })

describe('traceOf', () => {
  test('marks a gap with one null', () => {
    const trace = traceOf(7, [point(0, 20), point(60_000, 21), point(600_000, 30)], 60_000)
    expect(trace).toEqual({
      channelId: 7,
      at: [0, 60_000, 330_000, 600_000],
      c: [20, 21, null, 30],
      low: [19, 20, null, 29],
      high: [21, 22, null, 31],
    })
  })
  test('a wide step makes wide gaps usual', () => {
    expect(traceOf(7, [point(0, 20), point(1_500_000, 21)], 600_000).at).toHaveLength(2)
  })
})

describe('inSequence', () => {
  test('the probe that went in later takes over', () => {
    expect(
      inSequence([
        { channelId: 2, fromMs: 50, toMs: 80 },
        { channelId: 1, fromMs: 0, toMs: 100 },
      ]),
    ).toEqual([
      { channelId: 1, fromMs: 0, toMs: 50 },
      { channelId: 2, fromMs: 50, toMs: 80 },
    ])
  })
})
