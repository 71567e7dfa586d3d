import type { WrapMethod } from '#shared/domain/cooking.ts'
import { seededRandom } from '#shared/domain/random.ts'
import { createReachRule } from '#shared/forecast/reach-rule.ts'
import { drawCrew } from './crew.ts'
import type { TestHouse } from './house.ts'
import { drawKitchen, type DrawKitchen } from './kitchen.ts'
import { drawProbe } from './probe.ts'

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
export function drawCook(
  house: TestHouse,
  seed: number,
  index: number,
  draw: DrawKitchen = drawKitchen,
): TestCook {
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
  const kitchen = draw(random, house, { rawKg, cured: recipe.cured, habit, setC: firstSet })
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
      // Nobody sets a fire below what the meat has to reach.
      setC = Math.max(pullAtC + 8, Math.round((setC + crew.changeByC) * 10) / 10)
      events.push({ elapsed_s: atS, kind: 'pit_set', pit_set_c: setC })
      crew.changeAtS = undefined
    }
    const { pitC, coreC } = kitchen.minute(setC)
    const read = probe(atS, coreC, pitC)
    if (read !== null) rows.push(...read)
    const core = read === null ? Number.NaN : Number(read[0]?.split(',')[2] || Number.NaN)
    reach.add(atS, core)
    if (!wrapped && wrapMethod !== 'none' && !crew.never) {
      if (crew.earlyC !== undefined && coreC >= wrapAtC + crew.earlyC) wrapDue ??= atS
      if (reach.reachedS[0] !== undefined) wrapDue ??= atS + crew.delayS
      if (wrapDue !== undefined && atS >= wrapDue) {
        wrapped = true
        kitchen.wrap(wrapMethod)
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
