import { describe, expect, test } from 'vitest'
import { cutAtSensors, windowsOf, type Window } from './cuts.ts'

const minute = 60_000
const hour = 60 * minute
const sensor = { kind: 'digital', offsetC: 0 } as const
const part = { channelId: 7, fromMs: hour + 20_000, toMs: 5 * hour + 20_000 }
const cut = (fromMs: number, toMs: number) => ({ channelId: 7, fromMs, toMs, sensor })
const spans = (windows: Window[]) => windows.map(({ source, fromMs, toMs }) => [source, fromMs, toMs])

describe('windowsOf', () => {
  test('the ends of quarters come from minutes', () => {
    expect(spans(windowsOf(cut(part.fromMs, part.toMs), part, 0, 'quarters'))).toEqual([
      ['minutes', hour + minute, hour + 15 * minute],
      ['quarters', hour + 15 * minute, 5 * hour],
      ['minutes', 5 * hour, 5 * hour + minute],
    ])
  })

  test('the minute in which a sensor was changed comes from the readings, for each of the two', () => {
    const change = 2 * hour + 30_000
    expect(spans(windowsOf(cut(part.fromMs, change), part, 0, 'quarters'))).toEqual([
      ['minutes', hour + minute, hour + 15 * minute],
      ['quarters', hour + 15 * minute, 2 * hour],
      ['readings', 2 * hour, change],
    ])
    expect(spans(windowsOf(cut(change, part.toMs), part, 1, 'minutes'))).toEqual([
      ['readings', change, 2 * hour + minute],
      ['minutes', 2 * hour + minute, 5 * hour + minute],
    ])
  })

  test('what is too short for a roll-up comes from the finer one, and nothing comes twice', () => {
    const [early, late] = [2 * hour + 10_000, 2 * hour + 50_000]
    expect(spans(windowsOf(cut(early, late), part, 0, 'quarters'))).toEqual([['readings', early, late]])
    expect(spans(windowsOf(cut(2 * hour + minute, 2 * hour + 14 * minute), part, 0, 'quarters'))).toEqual([
      ['minutes', 2 * hour + minute, 2 * hour + 14 * minute],
    ])
    expect(spans(windowsOf(cut(2 * hour, 3 * hour), part, 0, 'readings'))).toEqual([
      ['readings', 2 * hour, 3 * hour],
    ])
  })
})

describe('cutAtSensors', () => {
  test('a time without a sensor is in no cut', () => {
    const cuts = cutAtSensors(part, [
      { fromMs: 3 * hour, toMs: Infinity, sensor },
      { fromMs: -Infinity, toMs: 2 * hour, sensor },
    ])
    expect(cuts.map(({ fromMs, toMs }) => [fromMs, toMs])).toEqual([
      [part.fromMs, 2 * hour],
      [3 * hour, part.toMs],
    ])
  })
})
