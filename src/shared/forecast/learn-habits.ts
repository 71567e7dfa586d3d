import type { CookerKind } from '../domain/cooking.ts'
import type { CrewHabit, HouseModel, PitHabit } from './house-model.ts'
import { modelStepS } from './piece-model.ts'
import type { FinishedCook } from './finished-cook.ts'
import type { LearnedCook } from './learn-prior.ts'
import { at } from './small-matrix.ts'

const generalPitWorth = 5
const generalCrewWorth = 6

/** How fires keep their sets, by kind, from finished cooks: bias, spread and how long a distance lasts. */
export function learnPits(cooks: readonly LearnedCook[], general: HouseModel['pits']): HouseModel['pits'] {
  const kinds = new Set(cooks.map(({ facts }) => facts.cookerKind))
  const learned: HouseModel['pits'] = { ...general }
  for (const kind of kinds)
    learned[kind] = learnPit(cooks, kind, general[kind] ?? { biasC: 0, sdC: 4, tauS: 3600 })
  return learned
}

function learnPit(cooks: readonly LearnedCook[], kind: CookerKind, general: PitHabit): PitHabit {
  const lag = Math.round(3600 / modelStepS)
  let used = 0
  let bias = 0
  let square = 0
  let product = 0
  for (const { facts, cook } of cooks) {
    // A changed set would need its own settling; such cooks are left out.
    if (facts.cookerKind !== kind || cook.setSinceS > 0) continue
    // The first two hours are the fire finding its set.
    const from = Math.ceil(7200 / modelStepS)
    const distances = Array.from(cook.pitC.subarray(from), (pit) => pit - cook.setC)
    if (distances.length < 2 * lag) continue
    used++
    bias += distances.reduce((sum, value) => sum + value, 0) / distances.length
    square += distances.reduce((sum, value) => sum + (value - general.biasC) ** 2, 0) / distances.length
    let lagged = 0
    for (let i = lag; i < distances.length; i++)
      lagged += (at(distances, i) - general.biasC) * (at(distances, i - lag) - general.biasC)
    product += lagged / (distances.length - lag)
  }
  if (used === 0) return general
  const share = used / (used + generalPitWorth)
  const correlation = Math.min(0.95, Math.max(0.2, product / Math.max(1e-6, square)))
  return {
    biasC: general.biasC + share * (bias / used - general.biasC),
    sdC: general.sdC + share * (Math.sqrt(square / used) - general.sdC),
    tauS: general.tauS * (-3600 / Math.log(correlation) / general.tauS) ** share,
  }
}

/** When the crew wraps, from finished cooks; the general habit fades as the house's own cooks add up. */
export function learnCrew(cooks: readonly FinishedCook[], general: CrewHabit): CrewHabit {
  const habit: CrewHabit = { earlyC: [], delaysS: [], never: 0 }
  for (const { facts, readings, events, wrapReachedS, pullReachedS } of cooks) {
    if (facts.wrapMethod === 'none') continue
    const wrapS = events.find((event) => event.kind === 'wrap')?.elapsedS
    if (wrapS === undefined) {
      if (pullReachedS !== undefined) habit.never++
    } else if (wrapReachedS === undefined || wrapS < wrapReachedS) {
      const index = readings.elapsedS.findIndex((time) => time >= wrapS)
      const near = Array.from(readings.coreC.subarray(Math.max(0, index - 5), index + 1)).filter(
        Number.isFinite,
      )
      near.sort((a, b) => a - b)
      const coreC = near[near.length >> 1]
      if (coreC !== undefined) habit.earlyC.push(Math.round(10 * Math.max(0, facts.wrapAtC - coreC)) / 10)
    } else habit.delaysS.push(Math.round(wrapS - wrapReachedS))
  }
  // Half a dozen evenly spaced samples of the general habit keep a new house from being too sure.
  const count = general.earlyC.length + general.delaysS.length + general.never
  const share = generalCrewWorth / Math.max(generalCrewWorth, count)
  const thin = (values: number[]) => {
    const sorted = values.slice().sort((a, b) => a - b)
    const keep = Math.round(share * sorted.length)
    return Array.from({ length: keep }, (_, i) => at(sorted, Math.floor(((i + 0.5) * sorted.length) / keep)))
  }
  return {
    earlyC: [...habit.earlyC, ...thin(general.earlyC)],
    delaysS: [...habit.delaysS, ...thin(general.delaysS)],
    never: habit.never + share * general.never,
  }
}
