import { beforeAll, describe, expect, it } from 'vitest'

import { tonight, type DemoTonight } from '../demo/tonight.ts'
import { openLedger } from '../testing/ledger.ts'
import { createLiveHouse } from './live-house.ts'
import { stableUuid } from './stable-uuid.ts'

const start = Date.UTC(2026, 11, 1, 5, 30)
let night: DemoTonight
beforeAll(() => {
  night = tonight({ seed: 1, now: start })
}, 60_000)

const house = (setChanges: { site: string; cooker: string; atMs: number; setC: number }[] = []) => {
  const states = [openLedger(night, 'quarry-road').state(start), openLedger(night, 'mill-yard').state(start)]
  return createLiveHouse({ houseSeed: '1', states, firstSetC: new Map(), setChanges, nowMs: start })
}

describe('createLiveHouse', () => {
  it('shows at the moment of starting what was back-filled', () => {
    const live = house()
    for (const series of night.series) {
      const last = series.atMs.at(-1) ?? 0
      const isOpen = start - last < 60_000
      if (!isOpen) continue
      const shown = live.deviceValues(series.site, series.device, last)
      expect(shown.find(({ channel }) => channel === series.channel)?.valueC).toBe(series.valueC.at(-1))
    }
    expect(night.series.filter(({ atMs }) => start - (atMs.at(-1) ?? 0) < 60_000).length).toBeGreaterThan(18)
  })

  it('goes on from there', () => {
    const live = house()
    const now = live.deviceValues('quarry-road', 'yard-box', start)
    const next = live.deviceValues('quarry-road', 'yard-box', start + 5000)
    expect(next.map(({ channel }) => channel)).toEqual(now.map(({ channel }) => channel))
    for (const [index, { valueC }] of next.entries()) {
      expect(Math.abs(valueC - (now[index]?.valueC ?? 0))).toBeLessThan(4)
    }
  })

  it('says nothing for a probe that is in nothing', () => {
    const channels = house()
      .deviceValues('quarry-road', 'yard-box', start)
      .map(({ channel }) => channel)
    expect(channels).toEqual([1, 2, 3, 5, 6])
  })

  it('lets a pit follow a change of its set', () => {
    const pitOf = (live: ReturnType<typeof house>, atMs: number) =>
      live.deviceValues('quarry-road', 'cabinet-box', atMs).find(({ channel }) => channel === 1)?.valueC ??
      NaN
    const changed = house([{ site: 'quarry-road', cooker: 'Cabinet One', atMs: start, setC: 100 }])
    const after = start + 3_600_000
    expect(pitOf(changed, after)).toBeLessThan(pitOf(house(), after) - 15)
    expect(pitOf(changed, start - 3_600_000)).toBe(pitOf(house(), start - 3_600_000))
  })

  it('knows nothing of devices and sites it was not told of', () => {
    expect(house().deviceValues('quarry-road', 'none-such', start)).toEqual([])
    expect(house().deviceValues('none-such', 'yard-box', start)).toEqual([])
  })
})

describe('stableUuid', () => {
  it('makes the same id of the same words, of version 8', () => {
    expect(stableUuid('a', 1)).toBe(stableUuid('a', 1))
    expect(stableUuid('a', 1)).not.toBe(stableUuid('a', 2))
    expect(stableUuid('a')).toMatch(/^[0-9a-f]{8}-[0-9a-f]{4}-8[0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}$/)
  })
})
