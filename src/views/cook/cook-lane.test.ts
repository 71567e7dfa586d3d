import { describe, expect, it } from 'vitest'
import { cookingPiece, fixtureNow, laneOf } from '@/components/chart/testing/lane-fixture.ts'
import type { CookEvent } from '@/shared/contract/event.ts'
import { bandSpans, carriedOn, cookWindow, readCook, readingRows } from './cook-lane.ts'

const hour = 3_600_000
const minute = 60_000

describe('cookWindow', () => {
  const cook = { now: 10 * hour, onAt: 2 * hour, doneAt: null, late: 16 * hour, servesAt: 15 * hour }

  it('holds the whole cook and leaves room behind its late end', () => {
    const { from, to, now } = cookWindow(cook)
    expect(from).toBeLessThan(2 * hour)
    expect(to).toBeGreaterThan(17 * hour)
    expect(now).toBe(10 * hour)
  })

  it('ends where the piece ended', () => {
    const { to, now } = cookWindow({ ...cook, now: 90 * hour, doneAt: 20 * hour })
    expect(now).toBe(20 * hour)
    expect(to).toBeLessThan(21 * hour)
  })
})

describe('carriedOn', () => {
  it('adds only what came after the fetched line', () => {
    const fetched = { channelId: 1, at: [0, 60], c: [10, null], low: [10, null], high: [10, null] }
    const live = { channelId: 1, at: [30, 60, 90], c: [1, 2, 12], low: [], high: [] }
    expect(carriedOn(fetched, live)).toEqual([
      [0, 10],
      [60, null],
      [90, 12],
    ])
    expect(carriedOn(null, undefined)).toEqual([])
  })
})

describe('reading a cook', () => {
  const piece = cookingPiece(1, 6)
  const lane = { piece, data: laneOf([piece]) }
  const said = [
    { at: fixtureNow - 5 * hour, phase: 'rise' as const },
    { at: fixtureNow - hour, phase: 'stall' as const },
  ]

  it('reads the past from the lines and the part of the cook from what was said then', () => {
    const reading = readCook(fixtureNow - 2 * hour, lane, said)
    expect(reading.coreC).toBeCloseTo(68 - 64 * Math.exp(-2), 1)
    expect(reading.phase).toBe('rise')
    expect(reading.forecast).toBeNull()
    expect(readCook(fixtureNow - 30 * minute, lane, said).phase).toBe('stall')
    expect(readCook(fixtureNow - 5.5 * hour, lane, said).phase).toBeNull()
  })

  it('reads what is to come from the fan, with its interval', () => {
    const { forecast, coreC } = readCook(fixtureNow + 2 * hour, lane, said)
    expect(coreC).toBeNull()
    if (forecast === null) throw new Error('there is a forecast')
    expect(forecast.lowC).toBeLessThan(forecast.c)
    expect(forecast.c).toBeLessThan(forecast.highC)
  })

  it('lists the last hours at quarter hours, newest first', () => {
    const rows = readingRows(lane, 2)
    expect(rows).toHaveLength(8)
    expect((rows[0]?.at ?? 0) - (rows[1]?.at ?? 0)).toBe(15 * minute)
    expect((rows[0]?.at ?? 1) % (15 * minute)).toBe(0)
  })
})

describe('bandSpans', () => {
  const event = (id: string, fact: CookEvent['fact'], change: Partial<CookEvent> = {}): CookEvent => ({
    id,
    pieceId: 1,
    cookerId: null,
    happenedAt: '2026-12-01T20:00:00.000Z',
    recordedAt: '2026-12-01T20:00:00.000Z',
    by: null,
    fact,
    note: null,
    correctsId: null,
    correctedById: null,
    ...change,
  })
  const cookers = new Map([
    [1, { bandLowC: 110, bandHighC: 130 }],
    [5, { bandLowC: 60, bandHighC: 70 }],
  ])

  it('follows the piece from cooker to cooker', () => {
    const spans = bandSpans(
      [
        event('a', { kind: 'on', cookerId: 1 }),
        event('b', { kind: 'moved', toCookerId: 9 }, { happenedAt: '2026-12-01T22:00:00.000Z' }),
        event('c', { kind: 'hold', cookerId: 5 }, { happenedAt: '2026-12-02T06:00:00.000Z' }),
        event('d', { kind: 'hold' }),
      ],
      cookers,
    )
    expect(spans.map(({ band }) => band?.bandLowC ?? null)).toEqual([110, null, 60])
  })

  it('leaves out what was taken back', () => {
    expect(
      bandSpans([event('a', { kind: 'moved', toCookerId: 5 }, { correctedById: 'b' })], cookers),
    ).toEqual([])
  })
})
