import type { CookerKind } from '../domain/cooking.ts'
import type { Random } from '../domain/random.ts'
import type { WrapPlan } from './crew-habit.ts'
import { misfitTauS, type PieceFit } from './fit-piece.ts'
import type { HouseModel, PitHabit } from './house-model.ts'
import { initialState, modelStepS, parameterCount, ratesOf, stepPiece } from './piece-model.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { at, solveTransposed } from './small-matrix.ts'

/** Median of five minutes that has stood for three: the rule comes this much after the temperature itself. */
export const reachRuleLagS = 330
const horizonS = 36 * 3600
/** The drawn courses have a point each step of the model, seconds. */
export const courseStepS = modelStepS

/** Drawn futures of one piece. Times in seconds since it went on; Infinity where a target is not reached. */
export interface Futures {
  wrapS: Float64Array
  pullS: Float64Array
  /** Core temperature of each draw at each coming quarter of an hour, °C; shorter draws end at their pull. */
  courses: Float64Array[]
}

export interface FutureConditions {
  wrapAtC: number
  pullAtC: number
  /** The set that will hold from now on, °C. */
  setC: number
  drawWrap: (random: Random) => WrapPlan
}

/**
 * Rolls fitted pieces forward. Each draw takes parameters from the fit's posterior (in opposite pairs, which steadies
 * the median), goes over the past with them, carries on from where the readings stand, and meets its own fire and
 * its own crew. `fits` carries for each law how many draws it gets.
 */
export function rollForward(
  fits: readonly { fit: PieceFit; draws: number }[],
  cook: PreparedCook,
  conditions: FutureConditions,
  pit: PitHabit,
  random: Random,
): Futures {
  const whole = fits.reduce((sum, { draws }) => sum + draws, 0)
  const wrapS = new Float64Array(whole).fill(Infinity)
  const pullS = new Float64Array(whole).fill(Infinity)
  const courses: Float64Array[] = []
  const longest = horizonS / modelStepS
  const noise = new Float64Array(longest)
  const unit = new Float64Array(parameterCount)
  let draw = 0
  for (const { fit, draws } of fits) {
    for (let i = 0; i < draws; i++, draw++) {
      if (i % 2 === 0) {
        for (let j = 0; j < parameterCount; j++) unit[j] = random.normal()
        for (let j = 0; j < longest; j++) noise[j] = Number.NaN
      } else for (let j = 0; j < parameterCount; j++) unit[j] = -at(unit, j)
      const offset = solveTransposed(fit.curvature, unit, parameterCount)
      const parameters = fit.parameters.slice()
      for (let j = 0; j < parameterCount; j++) parameters[j] = at(parameters, j) + at(offset, j)
      const course = rollOne(fit, parameters, cook, conditions, pit, random, noise, i % 2 === 0)
      wrapS[draw] = course.wrapS
      pullS[draw] = course.pullS
      courses.push(course.fan)
    }
  }
  return { wrapS, pullS, courses }
}

function rollOne(
  fit: PieceFit,
  parameters: Float64Array,
  cook: PreparedCook,
  conditions: FutureConditions,
  pit: PitHabit,
  random: Random,
  noise: Float64Array,
  fresh: boolean,
) {
  const rates = ratesOf(fit.law, parameters)
  const state = initialState(rates)
  const { atS } = cook
  const lastReadS = at(cook.core.timesS, cook.core.timesS.length - 1)
  const lastReadC = at(cook.core.coreC, cook.core.coreC.length - 1)
  let error = 0
  for (let k = 0; k < cook.steps; k++) {
    const startS = k * modelStepS
    const lengthS = Math.min(modelStepS, atS - startS)
    const before = at(state, 3)
    stepPiece(state, rates, at(cook.pitC, k), at(cook.wrapShare, k), lengthS / 3600)
    if (lastReadS >= startS && lastReadS <= startS + lengthS) {
      error = lastReadC - (before + ((at(state, 3) - before) * (lastReadS - startS)) / Math.max(1, lengthS))
    }
  }

  const stepKeep = Math.exp(-modelStepS / pit.tauS)
  const stepSd = pit.sdC * Math.sqrt(1 - stepKeep * stepKeep)
  const settleKeep = Math.exp(-modelStepS / 1500)
  let distance = cook.pitDistanceC ?? pit.biasC
  // What is left of a change of set settles faster than a fire wanders.
  const setMovedC = cook.setC - conditions.setC
  let settling = setMovedC
  if (atS - cook.setSinceS < 3600) {
    settling += distance - pit.biasC
    distance = pit.biasC
  }
  const plan = cook.wrapS === undefined ? conditions.drawWrap(random) : undefined
  let wrapFromS = plan?.kind === 'at' ? plan.atS : Infinity
  let wrapS = cook.wrapReachedS ?? Infinity
  let wrapSeen = cook.wrapReachedS !== undefined
  let pullS = Infinity
  const errorKeep = Math.exp(-modelStepS / misfitTauS)
  error *= Math.exp(-(atS - lastReadS) / misfitTauS)
  let core = at(state, 3) + error
  if (!wrapSeen && core >= conditions.wrapAtC) {
    wrapSeen = true
    wrapS = atS + reachRuleLagS / 2
    if (plan?.kind === 'after-reach') wrapFromS = wrapS + plan.delayS
  }
  if (core >= conditions.pullAtC) pullS = atS + reachRuleLagS / 2
  const fan: number[] = [core]
  for (let k = 1; pullS === Infinity && k <= horizonS / modelStepS; k++) {
    if (fresh) noise[k - 1] = random.normal()
    else if (Number.isNaN(at(noise, k - 1))) noise[k - 1] = -random.normal()
    distance = pit.biasC + (distance - pit.biasC) * stepKeep + stepSd * (fresh ? 1 : -1) * at(noise, k - 1)
    settling *= settleKeep
    const nowS = atS + k * modelStepS
    const wrapped = cook.wrapS !== undefined || nowS > wrapFromS ? 1 : 0
    stepPiece(state, rates, conditions.setC + distance + settling, wrapped, modelStepS / 3600)
    const before = core
    error *= errorKeep
    core = at(state, 3) + error
    if (plan?.kind === 'at-core' && wrapFromS === Infinity && core >= plan.coreC) wrapFromS = nowS
    if (!wrapSeen && core >= conditions.wrapAtC) {
      wrapSeen = true
      wrapS = crossedS(before, core, nowS, conditions.wrapAtC) + reachRuleLagS
      if (plan?.kind === 'after-reach') wrapFromS = wrapS + plan.delayS
    }
    if (core >= conditions.pullAtC) pullS = crossedS(before, core, nowS, conditions.pullAtC) + reachRuleLagS
    fan.push(core)
  }
  return { wrapS, pullS, fan: Float64Array.from(fan) }
}

/** When within the step that ends now the core passed a target. Module-level, as the inner loop makes no closures. */
function crossedS(before: number, core: number, nowS: number, target: number): number {
  return nowS - modelStepS * (core > before ? Math.min(1, (core - target) / (core - before)) : 0)
}

/** The habit of a fire of this kind. */
export function pitHabitOf(house: HouseModel, kind: CookerKind): PitHabit {
  return house.pits[kind] ?? { biasC: 0, sdC: 4, tauS: 3600 }
}
