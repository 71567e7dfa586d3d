import { beforeAll, describe, expect, it } from 'vitest'

import { createHouseModel } from '../house-model.ts'
import { createProbe, drawSlip } from '../probe.ts'
import { probeSeed } from '../channel-series.ts'
import type { DemoPiece } from './demo-night.ts'
import { demoSites, findRecipe } from './house.ts'
import { tonight, type DemoTonight } from './tonight.ts'

const now = Date.UTC(2026, 11, 1, 5, 31, 7)
const HOUR_MS = 3_600_000
const minutesSince = (piece: DemoPiece, kind: string) => {
  const event = piece.events.find(({ fact }) => fact.kind === kind)
  return event === undefined ? undefined : (now - event.atMs) / 60_000
}

describe('tonight', () => {
  let night: DemoTonight
  beforeAll(() => {
    night = tonight({ seed: 1, now })
  }, 60_000)

  const latest = (piece: DemoPiece, agoMs = 0) => {
    const probe = piece.probes.at(-1)
    const series = night.series.find((each) => {
      return each.site === piece.site && each.device === probe?.device && each.channel === probe.channel
    })
    const index = series?.atMs.findLastIndex((atMs) => atMs <= now - agoMs) ?? -1
    return series?.valueC[index] ?? NaN
  }
  const piece = (label: string) => {
    const found = night.pieces.find((each) => each.label === label)
    if (found === undefined) throw new Error(`no piece ${label}`)
    return found
  }

  it('stands in every part of a cook', () => {
    expect(latest(piece('R1'))).toBeLessThan(46)
    for (const label of ['N1', 'L1']) {
      expect(minutesSince(piece(label), 'wrap')).toBeUndefined()
      expect(latest(piece(label)) - latest(piece(label), 40 * 60_000)).toBeLessThan(2)
      expect(latest(piece(label))).toBeGreaterThan(57)
    }
    expect(minutesSince(piece('N2'), 'wrap')).toBeLessThan(30)
    expect(latest(piece('1a'))).toBeGreaterThan(80)
    expect(minutesSince(piece('1a'), 'pull')).toBeUndefined()
    expect(minutesSince(piece('3a'), 'rest')).toBeLessThan(25)
    expect(minutesSince(piece('3a'), 'hold')).toBeUndefined()
    expect(minutesSince(piece('R3'), 'hold')).toBeGreaterThan(20)
    expect(piece('R3').probes.at(-1)?.device).toBe('holding-box')
  })

  it('has cured pieces, both sites and at least five fires', () => {
    expect(night.pieces.some(({ cured }) => cured)).toBe(true)
    const fires = night.pieces.map(({ site, events }) => {
      const [on] = events
      return on?.fact.kind === 'on' ? `${site} ${on.fact.cooker}` : ''
    })
    expect(new Set(fires).size).toBeGreaterThanOrEqual(5)
    expect(new Set(night.pieces.map(({ site }) => site)).size).toBe(2)
  })

  it('cooks towards a service on the half hour, seven to nine hours away', () => {
    for (const { servesMs, portions } of night.services) {
      expect(servesMs % (HOUR_MS / 2)).toBe(0)
      expect(servesMs - now).toBeGreaterThan(7 * HOUR_MS)
      expect(servesMs - now).toBeLessThan(9 * HOUR_MS)
      expect(portions).toBeGreaterThan(20)
    }
  })

  it('knows nothing of the future', () => {
    for (const { events, probes } of night.pieces) {
      for (const event of events) expect(event.recordedMs).toBeLessThanOrEqual(now)
      for (const { fromMs } of probes) expect(fromMs).toBeLessThanOrEqual(now)
    }
    for (const { atMs } of night.series) expect(atMs.at(-1)).toBeLessThanOrEqual(now)
    expect(Math.min(...night.series.map(({ atMs }) => atMs[0] ?? 0))).toBeGreaterThanOrEqual(night.startsMs)
  })

  it('has no channel in two pieces at once', () => {
    const open = night.pieces.flatMap((each) => {
      return each.probes
        .filter(({ toMs }) => toMs === null)
        .map(({ device, channel }) => [each.site, device, channel].join(' '))
    })
    expect(new Set(open).size).toBe(open.length)
    expect(open.length).toBe(night.pieces.length)
  })

  it('is rebuilt to the same readings from nothing but seed, starts and events, and goes on without a seam', () => {
    const model = createHouseModel({ houseSeed: '1', sites: demoSites })
    const rebuilt = night.pieces.map((each) => {
      const identity = { ...each, cut: findRecipe(each.recipe)?.cut ?? 'packer' }
      const again = model.addPiece(identity)
      for (const { atMs, fact } of each.events) again.happened(atMs, fact)
      return again
    })
    for (const [index, again] of rebuilt.entries()) {
      const each = night.pieces[index]
      const probe = each?.probes.at(-1)
      if (each === undefined || probe === undefined) throw new Error('a piece without a probe')
      const shown = createProbe({
        seed: probeSeed('1', each.site, probe.device, probe.channel),
        role: 'meat',
        slip: drawSlip(again.curve.seed, again.curve.onMs),
      })
      const series = night.series.find(({ site, device, channel }) => {
        return site === each.site && device === probe.device && channel === probe.channel
      })
      if (each.events.some(({ fact }) => fact.kind === 'probe_reseated')) continue
      for (const [turn, atMs] of (series?.atMs ?? []).entries()) {
        if (atMs < probe.fromMs) continue
        const { coreC, airC } = again.curve.at(atMs)
        expect(shown.reading(atMs, coreC, airC)).toBe(series?.valueC[turn])
      }
      const { coreC } = again.curve.at(now)
      expect(Math.abs(again.curve.at(now + 60_000).coreC - coreC)).toBeLessThan(1)
    }
  })

  it('can be made for other seeds and hours', () => {
    for (const [seed, at] of [
      [2, Date.UTC(2026, 6, 4, 18)],
      [3, Date.UTC(2027, 1, 10, 12, 15)],
    ] as const) {
      expect(tonight({ seed, now: at }).pieces).toHaveLength(night.pieces.length)
    }
  }, 60_000)
})
