import { describe, expect, it } from 'vitest'

import type { WrapMethod } from '#shared/domain/cooking.ts'
import { seededRandom } from '#shared/domain/random.ts'

import { createPieceSimulation, drawPieceTraits, type PieceTraits } from './cook.ts'
import { humidityRatio } from './physics/humidity-ratio.ts'
import { saturationPressurePa } from './physics/saturation-pressure.ts'
import { balanceFace } from './physics/surface-balance.ts'
import { wetBulbC } from './physics/wet-bulb.ts'

const pit = { airC: 121, humidityRatio: 0.06, film: 10, pressurePa: 99_000 }
const room = { airC: 24, humidityRatio: 0.009, film: 6, pressurePa: 99_000 }
const traits = (change: Partial<PieceTraits> = {}): PieceTraits => ({
  ...drawPieceTraits(seededRandom('piece'), { rawKg: 6, cured: false }),
  ...change,
})
const startAt = (startCoreC: number, change?: Partial<PieceTraits>) =>
  createPieceSimulation({ traits: traits(change), startCoreC })

describe('balanceFace', () => {
  it('settles a wholly wet face without radiation at the wet bulb', () => {
    // An insulated inside: what the air gives, evaporation takes. The Lewis number of 0.85 and the constant
    // properties leave it near the thermodynamic wet bulb, not on it.
    const ratio = 0.05
    const vapourPa = (99_000 * ratio) / (0.621945 + ratio)
    const face = { surfaceC: 30, evaporation: 0, conductance: 0, drivingC: 0 }
    const around = { airC: 121, film: 12, emissivity: 0, vapourPa, wetness: 1, vapourFilm: 12 }
    for (let turn = 0; turn < 50; turn++) balanceFace(face, around, face.surfaceC, 1e-9)
    expect(Math.abs(face.surfaceC - wetBulbC(121, ratio, 99_000))).toBeLessThan(2.5)
  })

  it('lets dew form on a face colder than the dew point', () => {
    const face = { surfaceC: 4, evaporation: 0, conductance: 0, drivingC: 0 }
    const vapourPa = saturationPressurePa(40)
    balanceFace(
      face,
      { airC: 121, film: 10, emissivity: 0.9, vapourPa, wetness: 0.5, vapourFilm: 10 },
      4,
      1000,
    )
    expect(face.evaporation).toBeLessThan(0)
    expect(humidityRatio(vapourPa, 99_000)).toBeGreaterThan(0.04)
  })
})

describe('createPieceSimulation', () => {
  it('gives the same course however the steps are cut', () => {
    const fine = startAt(5)
    const coarse = startAt(5)
    for (let turn = 0; turn < 4 * 360; turn++) fine.step(10, pit)
    for (let turn = 0; turn < 4 * 9; turn++) coarse.step(400, pit)
    expect(coarse.coreC).toBe(fine.coreC)
    expect(coarse.massKg).toBe(fine.massKg)
  })

  it('keeps what does not fill an inner step for the next one', () => {
    const piece = startAt(5)
    piece.step(7, pit)
    expect(piece.elapsedS).toBe(0)
    piece.step(7, pit)
    expect(piece.elapsedS).toBe(10)
  })

  it('heats from the outside in and loses weight on the way', () => {
    const piece = startAt(5)
    const before = piece.massKg
    piece.step(3600, pit)
    expect(piece.surfaceC).toBeGreaterThan(40)
    expect(piece.coreC).toBeLessThan(piece.surfaceC - 20)
    piece.step(7 * 3600, pit)
    expect(piece.massKg).toBeLessThan(before - 0.5)
    expect(piece.evaporatedKg).toBeGreaterThan(0.3)
  })

  it('never gives off more water than the meat let go', () => {
    const own = traits()
    const piece = createPieceSimulation({ traits: own, startCoreC: 5 })
    piece.step(20 * 3600, { ...pit, airC: 150 })
    const surfaceKg = 2 * own.surfaceWater * own.areaM2
    expect(piece.evaporatedKg).toBeLessThan(own.trimmedKg * own.looseWater + surfaceKg)
    expect(piece.massKg).toBeGreaterThan(own.trimmedKg * (1 - own.looseWater - own.renderedFat) - surfaceKg)
  })

  it('pushes fastest in foil, then paper, then an open boat, then bare', () => {
    const hoursTo = (method: WrapMethod) => {
      const piece = startAt(5)
      while (piece.coreC < 70) piece.step(60, pit)
      if (method !== 'none') piece.wrap(method)
      while (piece.coreC < 94) piece.step(60, pit)
      return piece.elapsedS / 3600
    }
    const hours = (['foil', 'paper', 'boat', 'none'] as const).map(hoursTo)
    expect(hours).toEqual([...hours].sort((a, b) => a - b))
    expect((hours[3] ?? 0) - (hours[0] ?? 0)).toBeGreaterThan(1)
  })

  it('stands still longer the more loose water it has', () => {
    const hoursTo74 = (looseWater: number) => {
      const piece = startAt(5, { looseWater })
      while (piece.coreC < 74) piece.step(60, pit)
      return piece.elapsedS / 3600
    }
    expect(hoursTo74(0.38)).toBeGreaterThan(hoursTo74(0.15) + 1)
  })

  it('coasts on for a little after the pull and then cools', () => {
    const piece = startAt(5)
    while (piece.coreC < 74) piece.step(60, pit)
    piece.wrap('foil')
    while (piece.coreC < 93) piece.step(60, pit)
    const pulledC = piece.coreC
    piece.step(600, room)
    expect(piece.coreC).toBeGreaterThan(pulledC)
    piece.step(3 * 3600, room)
    expect(piece.coreC).toBeLessThan(pulledC - 5)
    expect(piece.coreC).toBeGreaterThan(24)
  })

  it('is delayed by a spritz', () => {
    const dry = startAt(5)
    const wet = startAt(5)
    for (let turn = 0; turn < 10; turn++) {
      dry.step(1800, pit)
      wet.step(1800, pit)
      wet.spritz()
    }
    expect(wet.coreC).toBeLessThan(dry.coreC)
  })
})

describe('drawPieceTraits', () => {
  it('makes bigger pieces thicker and refuses one without a mass', () => {
    const thickness = (rawKg: number) => drawPieceTraits(seededRandom(3), { rawKg, cured: false }).thicknessM
    expect(thickness(8)).toBeGreaterThan(thickness(5))
    expect(() => drawPieceTraits(seededRandom(3), { rawKg: 0, cured: false })).toThrow(RangeError)
  })
})
