import { DateTime } from 'luxon'
import { beforeAll, describe, expect, it } from 'vitest'

import type { DemoNights, DemoPiece } from './demo-night.ts'
import { findSite } from './house.ts'
import { pastCooks } from './past-cooks.ts'

const before = Date.UTC(2026, 10, 30, 20)
const first = (piece: DemoPiece, kind: string) => piece.events.find(({ fact }) => fact.kind === kind)?.atMs
const ends = (piece: DemoPiece) => first(piece, 'sliced') ?? Infinity

describe('pastCooks', () => {
  let past: DemoNights
  beforeAll(() => {
    past = pastCooks({ seed: 1, before, count: 40 })
  }, 60_000)

  it('makes as many finished pieces as asked for, all over beforehand', () => {
    expect(past.pieces).toHaveLength(40)
    for (const piece of past.pieces) {
      expect(ends(piece)).toBeLessThan(before)
      expect(piece.probes.every(({ toMs }) => toMs !== null)).toBe(true)
    }
    expect(Math.max(...past.cookerEvents.map(({ atMs }) => atMs))).toBeLessThanOrEqual(before)
  })

  it('gives the same cooks for the same seed and others for another', () => {
    const few = pastCooks({ seed: 1, before, count: 3 })
    expect(pastCooks({ seed: 1, before, count: 3 })).toEqual(few)
    expect(pastCooks({ seed: 2, before, count: 3 }).pieces).not.toEqual(few.pieces)
  })

  it('cooks towards eleven o’clock, never for a Monday', () => {
    for (const { servesMs, site } of past.services) {
      const serves = DateTime.fromMillis(servesMs, { zone: findSite(site).timeZone })
      expect([serves.hour, serves.minute]).toEqual([11, 0])
      expect(serves.weekday).not.toBe(1)
    }
    const late = past.pieces.filter((piece) => ends(piece) > piece.servesMs)
    expect(late.length).toBeLessThan(10)
  })

  it('logs each piece’s night in a possible order, with weights that fall', () => {
    for (const piece of past.pieces) {
      const order = ['on', 'wrap', 'moved', 'pull', 'rest', 'hold', 'sliced'].flatMap(
        (kind) => first(piece, kind) ?? [],
      )
      expect(order).toEqual([...order].sort((a, b) => a - b))
      expect(piece.events[0]?.fact.kind).toBe('on')
      for (const event of piece.events) expect(event.recordedMs).toBeGreaterThanOrEqual(event.atMs)
      expect(piece.rawKg).toBeGreaterThan(piece.trimmedKg ?? NaN)
      expect(piece.trimmedKg).toBeGreaterThan(piece.cookedKg ?? NaN)
      expect(piece.cookedKg).toBeGreaterThan(piece.slicedKg ?? NaN)
      expect(piece.slicedKg).toBeGreaterThan(piece.rawKg * 0.25)
    }
  })

  it('varies: recipes, sites, wrap delays, moves and pulls by feel', () => {
    expect(new Set(past.pieces.map(({ recipe }) => recipe)).size).toBe(5)
    expect(new Set(past.pieces.map(({ site }) => site)).size).toBe(2)
    const facts = past.pieces.flatMap(({ events }) => events.map(({ fact }) => fact))
    expect(facts.some(({ kind }) => kind === 'moved')).toBe(true)
    expect(facts.some((fact) => fact.kind === 'pull' && fact.by === 'feel')).toBe(true)
    expect(past.cookerEvents.some(({ fact }) => fact.kind === 'pit_set')).toBe(true)
    expect(past.cookerEvents.some(({ fact }) => fact.kind === 'fire_tended')).toBe(true)
  })

  it('has no probe in two pieces at once and no cooker overfull', () => {
    for (const [index, piece] of past.pieces.entries()) {
      for (const other of past.pieces.slice(index + 1).filter(({ site }) => site === piece.site)) {
        for (const one of piece.probes) {
          for (const two of other.probes) {
            if (one.device !== two.device || one.channel !== two.channel) continue
            const apart = (one.toMs ?? Infinity) <= two.fromMs || (two.toMs ?? Infinity) <= one.fromMs
            expect(apart).toBe(true)
          }
        }
      }
      const together = past.pieces.filter(
        (other) => other.site === piece.site && other.onMs <= piece.onMs && ends(other) > piece.onMs,
      )
      expect(together.length).toBeLessThanOrEqual(6)
    }
  })

  it('reads once a minute, with gaps, over each piece’s time, no moment twice', () => {
    for (const { atMs, valueC } of past.series) {
      expect(atMs).toHaveLength(valueC.length)
      expect(valueC.every((value) => value > -10 && value < 260)).toBe(true)
      expect(atMs.every((moment, index) => index === 0 || moment > (atMs[index - 1] ?? 0))).toBe(true)
      expect(atMs.every((moment) => moment % 60_000 === 0)).toBe(true)
    }
    const shares = past.pieces.map((piece) => {
      const [probe] = piece.probes
      const series = past.series.find((each) => {
        return each.site === piece.site && each.device === probe?.device && each.channel === probe.channel
      })
      const from = probe?.fromMs ?? 0
      const to = probe?.toMs ?? 0
      const read = series?.atMs.filter((atMs) => atMs >= from && atMs < to).length ?? 0
      return read / ((to - from) / 60_000)
    })
    expect(Math.min(...shares)).toBeGreaterThan(0.9)
    expect(shares.some((share) => share < 0.999)).toBe(true)
  })
})
