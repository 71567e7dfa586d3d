import { describe, expect, it } from 'vitest'

import { createFuelDips, fuelFedAt } from './fuel-dip.ts'
import { pitKinds } from './pit-kinds.ts'

const start = Date.UTC(2026, 10, 1)
const week = 7 * 86_400_000

describe('fuel dips', () => {
  it('come as often as the kind says and never on a holding cabinet', () => {
    const fed = fuelFedAt('pit', pitKinds.offset, start, start + 4 * week)
    const expected = 28 * 24 * pitKinds.offset.dipsPerHour
    expect(fed.length).toBeGreaterThan(expected * 0.7)
    expect(fed.length).toBeLessThan(expected * 1.3)
    expect(fuelFedAt('pit', pitKinds.holding, start, start + 4 * week)).toEqual([])
  })

  it('sink until the fire is fed and are over some time after it', () => {
    const [lonely] = fuelFedAt('pit', pitKinds.cabinet, start, start + 4 * week)
    if (lonely === undefined) throw new Error('no dip in four weeks')
    const sunk = createFuelDips('pit', pitKinds.cabinet)
    const fed = sunk(lonely)
    expect(fed).toBeGreaterThan(pitKinds.cabinet.dipC[0] * 0.8)
    expect(sunk(lonely - 300_000)).toBeLessThan(fed)
    expect(sunk(lonely + 600_000)).toBeLessThan(fed * 0.6)
    expect(sunk(lonely + 2 * 3_600_000)).toBeLessThan(0.5)
  })
})
