import { describe, expect, it } from 'vitest'

import { cookerKinds, type CookerKind } from '#shared/domain/cooking.ts'

import { createPitCurve } from './pit-curve.ts'
import { createPitSimulation } from './pit-simulation.ts'
import { createWeather } from './physics/weather.ts'

const HOUR_MS = 3_600_000
const night = Date.UTC(2026, 10, 20, 22)
const weather = createWeather({ seed: 'sky', elevationM: 220, longitudeDeg: -90 })
const curve = (kind: CookerKind, seed = 'pit') =>
  createPitCurve({ seed, kind, setC: kind === 'holding' ? 66 : 121, longitudeDeg: -90, weather })

function spread(kind: CookerKind) {
  const pit = curve(kind)
  const values: number[] = []
  for (let minute = 0; minute < 7 * 24 * 60; minute++) values.push(pit.at(night + minute * 60_000).airC)
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length
  return {
    mean,
    sd: Math.sqrt(values.reduce((sum, value) => sum + (value - mean) ** 2, 0) / values.length),
  }
}

describe('a pit', () => {
  it('wanders by kind: a log fire most, a holding cabinet least', () => {
    const sd = Object.fromEntries(cookerKinds.map((kind) => [kind, spread(kind).sd]))
    expect(sd.offset).toBeGreaterThan((sd.rotisserie ?? NaN) * 1.2)
    expect(sd.rotisserie).toBeGreaterThan(sd.cabinet ?? NaN)
    expect(sd.cabinet).toBeGreaterThan(sd.holding ?? NaN)
    expect(sd.offset).toBeLessThan(12)
  })

  it('stays about its set over a week', () => {
    for (const kind of ['offset', 'cabinet', 'rotisserie'] as const) {
      expect(Math.abs(spread(kind).mean - 121)).toBeLessThan(4)
    }
  })

  it('drops when its door is opened and comes back', () => {
    const shut = curve('cabinet')
    const opened = curve('cabinet')
    opened.openDoor(night, 60)
    const fall = (afterMs: number) => shut.at(night + afterMs).airC - opened.at(night + afterMs).airC
    expect(fall(0)).toBe(0)
    expect(fall(60_000)).toBeGreaterThan(20)
    expect(fall(HOUR_MS)).toBeLessThan(0.5)
  })

  it('follows a new set', () => {
    const pit = curve('cabinet')
    pit.setTo(night, 107)
    expect(Math.abs(pit.at(night - 60_000).airC - 121)).toBeLessThan(10)
    expect(Math.abs(pit.at(night + 2 * HOUR_MS).airC - 107)).toBeLessThan(10)
  })

  it('is never colder than the air outside', () => {
    const sky = weather(night)
    const pit = createPitSimulation({ seed: 'cold', kind: 'offset', setC: -40, startMs: night })
    pit.step(1800, sky)
    expect(pit.airC).toBeGreaterThanOrEqual(sky.airC)
  })
})

describe('createPitCurve', () => {
  it('is the same from whichever moment and in whatever order it is asked for', () => {
    const forward = curve('offset')
    const moments = Array.from({ length: 400 }, (_, turn) => night + turn * 430_000)
    const values = moments.map((atMs) => forward.at(atMs))
    const backward = curve('offset')
    const later = moments.toReversed().map((atMs) => backward.at(atMs))
    expect(later.toReversed()).toEqual(values)
  })

  it('gives with doors told beforehand what it gives with doors told on the way', () => {
    const told = curve('offset')
    const onTheWay = curve('offset')
    const doors = [night + 600_000, night + 5_400_000, night + 20 * HOUR_MS]
    for (const atMs of doors) told.openDoor(atMs, 45)
    const compared: [number, number][] = []
    for (let atMs = night; atMs < night + 24 * HOUR_MS; atMs += 60_000) {
      const { airC } = onTheWay.at(atMs)
      if (doors.includes(atMs)) onTheWay.openDoor(atMs, 45)
      compared.push([airC, told.at(atMs).airC])
    }
    for (const [one, other] of compared) expect(one).toBe(other)
  })

  it('does again what was computed past a door that is told late', () => {
    const late = curve('rotisserie')
    late.at(night + 5 * HOUR_MS)
    late.openDoor(night, 60)
    const early = curve('rotisserie')
    early.openDoor(night, 60)
    expect(late.at(night + 120_000)).toEqual(early.at(night + 120_000))
  })

  it('has no seam at noon', () => {
    const pit = curve('offset')
    const noon = Date.UTC(2026, 10, 21, 18)
    const before = pit.at(noon - 10_000).airC
    const at = pit.at(noon).airC
    const after = pit.at(noon + 10_000).airC
    expect(Math.abs(at - before)).toBeLessThan(0.5)
    expect(Math.abs(after - 2 * at + before)).toBeLessThan(0.05)
  })
})
