import { readyHouse, stretch } from './answer.ts'
import { learnCorrection, plainCorrection, targets, type PastForecast, type Target } from './correction.ts'
import type { FinishedCook } from './finished-cook.ts'
import type { HouseModel } from './house-model.ts'
import { learnCrew, learnPits } from './learn-habits.ts'
import { learnPriors, type LearnedCook } from './learn-prior.ts'
import { prepareCook } from './prepare-cook.ts'
import { replayCook, type Replay, type ReplayRow } from './replay.ts'
import { blendMedian, chooseWeights, fitSecond, secondPredictor, type SecondModel } from './second-model.ts'
import { at } from './small-matrix.ts'

export interface HouseLearning {
  /** What the house starts from. */
  general: HouseModel
  /** Whether the statistical model is fitted; it needs `leastForSecond` cooks anyway. */
  withSecond?: boolean
  /** Every how many seconds of a past cook a forecast is replayed. */
  everyS?: number
}

const folds = 5
const leastForCorrection = 5
const leastForSecond = 20

/**
 * Learns a house from its finished cooks: its fires' and its crew's habits, its pieces' prior, a statistical model
 * beside the state model, and how far past forecasts were off. The last two are learned from replays in which each
 * fifth of the cooks was forecast by a model that had not seen it. The result is plain data.
 */
export function learnHouse(finished: readonly FinishedCook[], options: HouseLearning): HouseModel {
  const { general, withSecond = true } = options
  const cooks = finished.flatMap(preparedOf)
  const house = firstPart(cooks, general)
  if (cooks.length < leastForCorrection) return house
  const moments = replayFolds(cooks, general, options.everyS ?? 1200)
  const rows = { wrap: moments.flatMap(({ wrap }) => wrap), pull: moments.flatMap(({ pull }) => pull) }
  const useSecond = withSecond && cooks.length >= leastForSecond
  const second: SecondModel = {}
  const past: Record<Target, PastForecast[]> = { wrap: [], pull: [] }
  for (const target of targets) {
    const ofTarget = rows[target]
    const said = useSecond ? learnSecond(ofTarget, `${target}-${cooks.length}`) : undefined
    if (said) second[target] = said.model
    past[target] = ofTarget.map((row, i) => ({
      cook: String(row.cook),
      coreC: at(row.features, 0),
      times: said ? stretch(row.times, said.medians[i] ?? row.stateS) : row.times,
      truthS: row.truthS,
    }))
  }
  const correction = learnCorrection(past, general.correction)
  return { ...house, correction, ...(useSecond ? { second } : {}) }
}

interface Case {
  finished: FinishedCook
  learned: LearnedCook
}

function preparedOf(finished: FinishedCook): Case[] {
  const { facts, readings, events, pullReachedS } = finished
  const lastS = readings.elapsedS[readings.elapsedS.length - 1] ?? 0
  const cook = prepareCook(facts, readings, events, pullReachedS ?? lastS)
  return cook.core.timesS.length < 12 ? [] : [{ finished, learned: { facts, cook } }]
}

function firstPart(cases: readonly Case[], general: HouseModel): HouseModel {
  const learned = cases.map((entry) => entry.learned)
  return {
    version: 1,
    cooks: cases.length,
    laws: learnPriors(learned, general.laws),
    pits: learnPits(learned, general.pits),
    crew: learnCrew(
      cases.map(({ finished }) => finished),
      general.crew,
    ),
    correction: general.correction,
  }
}

/** Forecasts of every cook's moments by a model that has not seen the cook. */
function replayFolds(cases: readonly Case[], general: HouseModel, everyS: number): Replay[] {
  return Array.from({ length: folds }, (_, fold) => {
    const house = firstPart(
      cases.filter((_, i) => i % folds !== fold),
      general,
    )
    const ready = readyHouse({ ...house, correction: plainCorrection() })
    return cases.map(({ finished }, index) =>
      index % folds === fold ? replayCook(finished, index, ready, everyS) : { wrap: [], pull: [] },
    )
  }).flat()
}

/** The statistical model of a target with out-of-fold medians of its blend. */
function learnSecond(rows: readonly ReplayRow[], seed: string) {
  if (rows.length < 100) return undefined
  const says = rows.map(() => ({ tree: 0, ridge: 0 }))
  for (let fold = 0; fold < folds; fold++) {
    const predict = secondPredictor(
      fitSecond(
        rows.filter(({ cook }) => cook % folds !== fold),
        seed,
      ),
    )
    rows.forEach((row, i) => {
      if (row.cook % folds === fold) says[i] = predict(row)
    })
  }
  const { treeWeight, ridgeWeight } = chooseWeights(rows, says)
  const medians = rows.map((row, i) =>
    blendMedian(row.stateS, says[i] ?? { tree: 0, ridge: 0 }, treeWeight, ridgeWeight),
  )
  return { model: { ...fitSecond(rows, seed), treeWeight, ridgeWeight }, medians }
}
