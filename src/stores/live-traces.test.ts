import { describe, expect, it } from 'vitest'
import type { ReadingTuple } from '@/shared/contract/live.ts'
import { extendTraces, traceSpanMs, tracesFrom } from './live-traces.ts'

// On a step's boundary, so that the tests can count in steps of twenty seconds.
const start = Date.parse('2026-12-02T00:00:00Z')
const second = 1000
const options = { gapMs: () => 90 * second, now: start + 3_600_000 }

function lineOf(readings: ReadingTuple[], before = tracesFrom([])) {
  const trace = extendTraces(before, readings, options).get(1)
  if (trace === undefined) throw new Error('no line')
  return trace
}

describe('a line', () => {
  it('has one point in twenty seconds, with the extremes of the step', () => {
    const trace = lineOf([
      [1, start, 60],
      [1, start + 5 * second, 66],
      [1, start + 10 * second, 58],
      [1, start + 15 * second, 61],
      [1, start + 20 * second, 62],
    ])
    expect(trace).toEqual({
      channelId: 1,
      at: [start, start + 20 * second],
      c: [61, 62],
      low: [58, 62],
      high: [66, 62],
    })
  })

  it('is broken where its probe was silent', () => {
    const trace = lineOf([
      [1, start, 60],
      [1, start + 91 * second, 63],
    ])
    expect(trace.c).toEqual([60, null, 63])
    expect(trace.at).toEqual([start, start + 1, start + 91 * second])
  })

  it('takes late readings where they belong and closes the gap that they fill', () => {
    const broken = extendTraces(
      tracesFrom([]),
      [
        [1, start, 60],
        [1, start + 160 * second, 64],
      ],
      options,
    )
    const filled = lineOf([[1, start + 80 * second, 62]], broken)
    expect(filled.c).toEqual([60, 62, 64])
    expect(filled.at).toEqual([start, start + 80 * second, start + 160 * second])
  })

  it('widens a step by a late reading without moving its last value', () => {
    const trace = lineOf([[1, start + 5 * second, 70]], tracesFrom([lineOfThree()]))
    expect(trace.c).toEqual([60, 61, 62])
    expect(trace.high).toEqual([70, 61, 62])
  })

  it('goes on from what the server gave, and leaves that alone', () => {
    const given = lineOfThree()
    const after = lineOf([[1, start + 80 * second, 63]], tracesFrom([given]))
    expect(after.c).toEqual([60, 61, 62, 63])
    expect(given.c).toEqual([60, 61, 62])
  })

  it('is cut to twelve hours, so that a wall can run for weeks', () => {
    let traces = tracesFrom([])
    const end = start + 30 * 3_600_000
    for (let at = start; at <= end; at += 20 * second) {
      traces = extendTraces(traces, [[1, at, 60]], { ...options, now: at })
    }
    const times = traces.get(1)?.at ?? []
    expect(times.length).toBeLessThanOrEqual(12.5 * 180 + 1)
    expect(times[0]).toBeGreaterThan(end - traceSpanMs - 30 * 60 * second)
    expect(times.at(-1)).toBe(end)
  })

  it('does not mix channels', () => {
    const traces = extendTraces(
      tracesFrom([]),
      [
        [1, start, 60],
        [2, start, 120],
      ],
      options,
    )
    expect(traces.get(1)?.c).toEqual([60])
    expect(traces.get(2)?.c).toEqual([120])
  })
})

function lineOfThree() {
  const c = [60, 61, 62]
  return { channelId: 1, at: [0, 20, 40].map((s) => start + s * second), c, low: [...c], high: [...c] }
}
