import type { WrapMethod } from '../domain/cooking.ts'
import { seededRandom } from '../domain/random.ts'
import { createWrapPlans, type WrapPlan } from './crew-habit.ts'
import { fitPiece, type PieceFit } from './fit-piece.ts'
import type { HouseModel } from './house-model.ts'
import { evaporationLaws, type EvaporationLaw } from './piece-model.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { regressorsOf, type ReadyPrior } from './prior.ts'
import { pitHabitOf, rollForward, type Futures } from './roll-forward.ts'
import { at } from './small-matrix.ts'
import type { CookFacts } from './types.ts'

/** What would be done otherwise than planned from now on. */
export interface Scenario {
  pitSetC?: number
  /** `now` wraps at once, `none` never, `planned` as the crew would. */
  wrap?: 'now' | 'none' | 'planned'
  wrapMethod?: WrapMethod
}

export interface StateForecast {
  fits: { fit: PieceFit; weight: number }[]
  futures: Futures
}

const drawsInAll = 96
/** A reading's weight falls over this time, seconds. */
const forgetS = 8 * 3600
/** The laws' evidence is about a model that is a little wrong whichever law holds: it counts only in part. */
const evidenceShare = 0.5

/** Fits every law to a piece and rolls the mixture forward. */
export function stateForecast(
  facts: CookFacts,
  cook: PreparedCook,
  house: HouseModel,
  priors: Record<EvaporationLaw, ReadyPrior>,
  scenario: Scenario = {},
): StateForecast {
  const method = scenario.wrapMethod ?? cook.wrappedWith ?? facts.wrapMethod
  const fits = fitLaws(facts, cook, priors, method)
  const random = seededRandom(facts.id, Math.floor(cook.atS / 60))
  const coreC = at(cook.core.coreC, cook.core.coreC.length - 1)
  const futures = rollForward(
    fits.map(({ fit, weight }) => ({ fit, draws: 2 * Math.round((weight * drawsInAll) / 2) })),
    cook,
    {
      wrapAtC: facts.wrapAtC,
      pullAtC: facts.pullAtC,
      setC: scenario.pitSetC ?? cook.setC,
      drawWrap: wrapDraws(facts, cook, house, coreC, scenario),
    },
    pitHabitOf(house, facts.cookerKind),
    random,
  )
  return { fits, futures }
}

/** Each law's fit with its weight. A law that is out of the question is not rolled forward. */
export function fitLaws(
  facts: CookFacts,
  cook: PreparedCook,
  priors: Record<EvaporationLaw, ReadyPrior>,
  method: WrapMethod,
): StateForecast['fits'] {
  const x = regressorsOf(facts, method)
  const fits = evaporationLaws.map((law) => fitPiece(law, priors[law], cook, x, { forgetS }))
  const scores = fits.map(
    (fit) => evidenceShare * fit.logEvidence + Math.log(Math.max(0.02, priors[fit.law].law.share)),
  )
  const best = Math.max(...scores)
  const whole = scores.reduce((sum, score) => sum + Math.exp(score - best), 0)
  return fits.map((fit, i) => ({ fit, weight: Math.exp((scores[i] ?? best) - best) / whole }))
}

function wrapDraws(
  facts: CookFacts,
  cook: PreparedCook,
  house: HouseModel,
  coreC: number,
  scenario: Scenario,
): () => WrapPlan {
  const method = scenario.wrapMethod ?? facts.wrapMethod
  if (scenario.wrap === 'now') return () => ({ kind: 'at', atS: cook.atS })
  if (scenario.wrap === 'none' || method === 'none') return () => ({ kind: 'never' })
  const draw = createWrapPlans(house.crew, {
    atS: cook.atS,
    coreC,
    wrapAtC: facts.wrapAtC,
    wrapReachedS: cook.wrapReachedS,
  })
  const random = seededRandom(facts.id, 'wrap', Math.floor(cook.atS / 60))
  return () => draw(random)
}
