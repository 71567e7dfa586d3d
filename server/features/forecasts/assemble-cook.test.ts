import { describe, expect, it } from 'vitest'
import { assembleCook } from './assemble-cook.ts'
import type { CookRecord } from './cook-record.ts'

const onAt = Date.parse('2026-11-30T22:00:30Z')
const minute = 60_000
const record: CookRecord = {
  pieceId: 7,
  site: 'quarry-road',
  recipe: 'house-brisket',
  cured: false,
  rawKg: 6.1,
  wrapAtC: 74,
  wrapMethod: 'paper',
  pullAtC: 95,
  onAt,
  pulledAt: null,
  followsId: null,
  cookerKind: 'offset',
  stretches: [{ cookerId: 1, from: onAt, to: null }],
  pitSets: new Map([
    [
      1,
      {
        setNowC: 107,
        changes: [
          {
            id: 's',
            correctsId: null,
            happenedAt: onAt + 90 * minute,
            recordedAt: onAt + 90 * minute,
            fact: { kind: 'pit_set', pitSetC: 107 },
            pitSetBeforeC: 121,
          },
        ],
      },
    ],
  ]),
  wraps: [{ at: onAt + 60 * minute, method: 'paper' }],
  core: [],
  pit: [],
}
const line = (...points: [number, number][]) => ({
  at: Float64Array.from(points, ([at]) => onAt + at * minute),
  c: Float64Array.from(points, ([, c]) => c),
})

describe('assembleCook', () => {
  it('joins core and pit on the minutes since the piece went on', () => {
    const lines = {
      core: [line([-1, 99], [0.5, 4], [1.5, 5]), line([3.2, 7], [3.7, 8])],
      pit: [line([0.4, 120], [1.5, 122], [4.1, 121], [9, 0])],
    }
    const { readings } = assembleCook(record, lines, onAt + 5 * minute)
    expect([...readings.elapsedS]).toEqual([30, 90, 222, 246])
    expect([...readings.coreC]).toEqual([4, 5, 7.5, Number.NaN])
    expect([...readings.pitC]).toEqual([120, 122, Number.NaN, 121])
  })

  it('tells of what happened up to the moment, and of nothing later', () => {
    const none = { core: [], pit: [] }
    const early = assembleCook(record, none, onAt + 30 * minute)
    expect(early.facts).toMatchObject({ id: '7', pitSetC: 121, cookerKind: 'offset', wrapMethod: 'paper' })
    expect(early.events).toEqual([])
    expect(early.readings.elapsedS).toHaveLength(0)
    expect(assembleCook(record, none, onAt + 120 * minute).events).toEqual([
      { elapsedS: 3600, kind: 'wrap', method: 'paper' },
      { elapsedS: 5400, kind: 'pit_set', pitSetC: 107 },
    ])
  })
})
