import type { WrapMethod } from '#shared/domain/cooking.ts'
import { seededRandom, type Random } from '#shared/domain/random.ts'
import { createReachRule } from '#shared/forecast/reach-rule.ts'
import { pieceLaws, type PieceLaw, type TestHouse } from './house.ts'
import { drawPiece } from './piece.ts'
import { drawPit } from './pit.ts'

/** A cook in the back-test's own form. */
export interface TestCook {
  id: string
  recipe: string
  cured: boolean
  raw_kg: number
  cooker_kind: string
  pit_set_c: number
  wrap_at_c: number
  wrap_method: WrapMethod
  pull_at_c: number
  events: ({ elapsed_s: number; kind: 'wrap' } | { elapsed_s: number; kind: 'pit_set'; pit_set_c: number })[]
  csv: string
}

const longestS = 30 * 3600

/** One whole cook of a house, with a crew, a fire and a probe that has faults. */
export function drawCook(house: TestHouse, seed: number, index: number): TestCook {
  const random = seededRandom('cook', seed, index)
  const pick = <T>(list: readonly T[], fallback: T) =>
    list[Math.floor(random.uniform() * list.length)] ?? fallback
  const recipe = pick(house.recipes, house.recipes[0] ?? missing())
  const habit = pick(house.pits, house.pits[0] ?? missing())
  const rawKg = Math.round(recipe.kgMean * Math.exp(0.17 * random.normal()) * 100) / 100
  const firstSet = Math.round(pick(recipe.pitSetsC, 121.1) * 10) / 10
  const wrapMethod = pick(recipe.wrapMethods, 'paper')
  const wrapAtC = Math.round(recipe.wrapAtC)
  const pullAtC = Math.round(recipe.pullAtC)
  const piece = drawPiece(random, house, drawLaw(random, house), rawKg, recipe.cured)
  const pit = drawPit(random, habit, firstSet)
  const probe = drawProbe(random, house)
  const crew = drawCrew(random, house)
  const reach = createReachRule([wrapAtC, pullAtC])
  const events: TestCook['events'] = []
  const rows: string[] = ['elapsed_s,pit_c,core_c']
  let setC = firstSet
  let wrapDue: number | undefined
  let wrapped = false
  let endS = longestS

  for (let atS = 0; atS <= endS; atS += 60) {
    if (crew.changeAtS !== undefined && atS >= crew.changeAtS) {
      setC = Math.round((setC + crew.changeByC) * 10) / 10
      events.push({ elapsed_s: atS, kind: 'pit_set', pit_set_c: setC })
      crew.changeAtS = undefined
    }
    const pitC = pit.minute(setC)
    piece.step(60, pitC)
    const coreC = piece.probeC()
    const read = probe(atS, coreC, pitC)
    if (read !== null) rows.push(...read)
    const core = read === null ? Number.NaN : Number(read[0]?.split(',')[2] || Number.NaN)
    reach.add(atS, core)
    if (!wrapped && wrapMethod !== 'none' && !crew.never) {
      if (crew.earlyC !== undefined && coreC >= wrapAtC + crew.earlyC) wrapDue ??= atS
      if (reach.reachedS[0] !== undefined) wrapDue ??= atS + crew.delayS
      if (wrapDue !== undefined && atS >= wrapDue) {
        wrapped = true
        piece.wrap(wrapMethod)
        pit.openDoor()
        events.push({ elapsed_s: atS, kind: 'wrap' })
      }
    }
    if (reach.reachedS[1] !== undefined && endS === longestS)
      endS = atS + 60 * Math.floor(5 + 20 * random.uniform())
  }
  return {
    id: `c${String(index).padStart(3, '0')}`,
    recipe: recipe.name,
    cured: recipe.cured,
    raw_kg: rawKg,
    cooker_kind: habit.kind,
    pit_set_c: firstSet,
    wrap_at_c: wrapAtC,
    wrap_method: wrapMethod,
    pull_at_c: pullAtC,
    events,
    csv: rows.join('\n') + '\n',
  }
}

function missing(): never {
  throw new Error('a test house has at least one recipe and one pit')
}

function drawLaw(random: Random, house: TestHouse): PieceLaw {
  const whole = pieceLaws.reduce((sum, law) => sum + house.lawShares[law], 0)
  let left = random.uniform() * whole
  for (const law of pieceLaws) {
    left -= house.lawShares[law]
    if (left <= 0) return law
  }
  return 'vapour'
}

function drawCrew(random: Random, house: TestHouse) {
  const { crew } = house
  const changes = random.uniform() < crew.setChangeShare
  const crewOf: {
    never: boolean
    earlyC: number | undefined
    delayS: number
    changeAtS: number | undefined
    changeByC: number
  } = {
    never: random.uniform() < crew.neverShare,
    earlyC: random.uniform() < crew.earlyShare ? -1 - 8 * random.uniform() : undefined,
    delayS: crew.delayMedianS * Math.exp(crew.delaySpread * random.normal()),
    changeAtS: changes ? 60 * Math.floor(120 + 480 * random.uniform()) : undefined,
    changeByC: (random.uniform() < 0.5 ? -1 : 1) * (6 + 12 * random.uniform()),
  }
  return crewOf
}

/** A probe with noise, lag of rounding, spikes, repeated rows, gaps, slips, re-seating and a late start. */
function drawProbe(random: Random, house: TestHouse) {
  const between = (low: number, high: number) => low + (high - low) * random.uniform()
  const noise = between(0.05, 0.3)
  const rounding = random.uniform() < 0.3 ? 0.5 : 0.1
  const faulty = () => random.uniform() < house.faultShare
  const lateS = faulty() ? between(1200, 6000) : 0
  const slip = faulty()
    ? { fromS: between(7200, 30000), lastsS: between(900, 3600), share: between(0.2, 0.8) }
    : undefined
  const reseat = faulty() ? { fromS: between(7200, 30000), byC: 3 * random.normal() } : undefined
  const spikeChance = between(0, 0.004)
  const gapChance = between(0, 1) / 600
  let gapUntilS = -1
  const round = (value: number) => (Math.round(value / rounding) * rounding).toFixed(1)
  return (atS: number, coreC: number, pitC: number): string[] | null => {
    if (random.uniform() < gapChance) gapUntilS = atS + between(120, random.uniform() < 0.15 ? 5400 : 1200)
    if (atS < gapUntilS) return null
    let core = coreC + noise * random.normal()
    if (slip && atS >= slip.fromS && atS < slip.fromS + slip.lastsS) core += slip.share * (pitC - core)
    if (reseat && atS >= reseat.fromS) core += reseat.byC
    if (random.uniform() < spikeChance) core += (random.uniform() < 0.5 ? -1 : 1) * between(8, 60)
    const coreText = atS < lateS || random.uniform() < 0.003 ? '' : round(core)
    const pitText = random.uniform() < 0.003 ? '' : round(pitC + (random.uniform() < spikeChance ? 80 : 0))
    const row = `${String(atS)},${pitText},${coreText}`
    return random.uniform() < 0.002 ? [row, row] : [row]
  }
}
