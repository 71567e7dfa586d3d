import { beforeAll, describe, expect, it } from 'vitest'

import type { CookerKind } from '#shared/domain/cooking.ts'
import { seededRandom } from '#shared/domain/random.ts'

import { createPieceSimulation, createPitSimulation, createWeather, drawPieceTraits } from './cook.ts'
import { longestStall } from './longest-stall.ts'

/** What is said here of the trade is common practice; temperatures 250 °F and 275 °F. */
const USUAL_C = 121.1
const HOT_C = 135
const WRAP_C = 74
const PULL_C = 95
const SEEDS = Array.from({ length: 300 }, (_, index) => index + 1)

interface Course {
  wrapHours: number
  pullHours: number
  stallMinutes: number
  /** Cooked over raw. */
  yieldShare: number
}

/** Cooks one seeded packer on one of the three kinds of fire, wrapped in paper when it reaches 74 °C. */
function cook(seed: number, cured: boolean, setC: number): Course {
  const random = seededRandom('trade', seed)
  const rawKg = Math.min(8.5, Math.max(4.5, 6.2 + 0.8 * random.normal()))
  const traits = drawPieceTraits(random, { rawKg, cured })
  const piece = createPieceSimulation({ traits, startCoreC: 5 })
  const kinds: CookerKind[] = ['offset', 'cabinet', 'rotisserie']
  const startMs = Date.UTC(2026, 0, 1, 23) + seed * 86_400_000
  const pit = createPitSimulation({
    seed: `pit ${String(seed)}`,
    kind: kinds[seed % 3] ?? 'offset',
    setC,
    startMs,
  })
  const coreC = [piece.coreC]
  let wrapHours = NaN
  while (piece.coreC < PULL_C && piece.elapsedS < 30 * 3600) {
    const sky = weather(pit.atMs)
    for (let turn = 0; turn < 6; turn++) {
      pit.step(10, sky)
      piece.step(10, {
        airC: pit.airC,
        humidityRatio: pit.humidityRatio,
        film: pit.film,
        pressurePa: sky.pressurePa,
      })
    }
    coreC.push(piece.coreC)
    if (piece.coreC >= WRAP_C && piece.wrapped === 'none') {
      wrapHours = piece.elapsedS / 3600
      piece.wrap('paper')
    }
  }
  return {
    wrapHours,
    pullHours: piece.elapsedS / 3600,
    stallMinutes: longestStall(coreC)?.minutes ?? 0,
    yieldShare: piece.massKg / rawKg,
  }
}

const weather = createWeather({ seed: 'trade', elevationM: 220, longitudeDeg: -90 })

function quantile(courses: readonly Course[], of: keyof Course, share: number): number {
  const sorted = courses.map((course) => course[of]).sort((a, b) => a - b)
  return sorted[Math.round(share * (sorted.length - 1))] ?? NaN
}

const median = (courses: readonly Course[], of: keyof Course) => quantile(courses, of, 0.5)

describe('300 seeded pieces (seeds 1 to 300) against what the trade says', () => {
  let uncured: Course[] = []
  let uncuredHot: Course[] = []
  let cured: Course[] = []
  beforeAll(() => {
    uncured = SEEDS.map((seed) => cook(seed, false, USUAL_C))
    uncuredHot = SEEDS.map((seed) => cook(seed, false, HOT_C))
    cured = SEEDS.map((seed) => cook(seed, true, USUAL_C))
  }, 60_000)

  it('reaches the wrap temperature at 250 °F after 6 to 9 h and the pull after 10 to 14 h', () => {
    expect(median(uncured, 'wrapHours')).toBeGreaterThan(6)
    expect(median(uncured, 'wrapHours')).toBeLessThan(9)
    expect(median(uncured, 'pullHours')).toBeGreaterThan(10)
    expect(median(uncured, 'pullHours')).toBeLessThan(14)
  })

  it('pulls at 275 °F after 7 to 11 h', () => {
    expect(median(uncuredHot, 'pullHours')).toBeGreaterThan(7)
    expect(median(uncuredHot, 'pullHours')).toBeLessThan(11)
  })

  it('runs cured pieces ahead of uncured ones, in the middle and nearly always seed by seed', () => {
    expect(median(cured, 'wrapHours')).toBeLessThan(median(uncured, 'wrapHours') - 1)
    expect(median(cured, 'pullHours')).toBeLessThan(median(uncured, 'pullHours') - 1)
    const ahead = cured.filter((course, index) => course.pullHours < (uncured[index]?.pullHours ?? 0))
    expect(ahead.length).toBeGreaterThan(285)
  })

  it('stalls for nothing to six hours, most for one to four', () => {
    expect(quantile(uncured, 'stallMinutes', 0)).toBe(0)
    expect(quantile(uncured, 'stallMinutes', 1)).toBeLessThanOrEqual(360)
    expect(quantile(uncured, 'stallMinutes', 1)).toBeGreaterThan(240)
    expect(median(uncured, 'stallMinutes')).toBeGreaterThan(60)
    expect(median(uncured, 'stallMinutes')).toBeLessThan(240)
    expect(median(cured, 'stallMinutes')).toBeLessThan(median(uncured, 'stallMinutes'))
  })

  it('yields about half: raw packer to cooked 45 to 55 %', () => {
    expect(median(uncured, 'yieldShare')).toBeGreaterThan(0.45)
    expect(median(uncured, 'yieldShare')).toBeLessThan(0.55)
  })

  it('gives the same cook for the same seed', () => {
    expect(cook(17, false, USUAL_C)).toEqual(uncured[16])
  })
})
