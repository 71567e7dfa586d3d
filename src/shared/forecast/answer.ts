import { correctTimes, type Target } from './correction.ts'
import { answerFeatures, cookFeatures } from './features.ts'
import type { HouseModel } from './house-model.ts'
import { readyPrior, type ReadyPrior } from './prior.ts'
import type { PreparedCook } from './prepare-cook.ts'
import type { EvaporationLaw } from './piece-model.ts'
import { fiveQuantiles } from './quantiles.ts'
import type { Futures } from './roll-forward.ts'
import { blendMedian, secondPredictor, type SecondSays } from './second-model.ts'
import { at } from './small-matrix.ts'
import type { CookFacts, ReachTimes } from './types.ts'

/** A house's model made ready for many forecasts: matrices inverted, random features drawn. */
export interface ReadyHouse {
  house: HouseModel
  priors: Record<EvaporationLaw, ReadyPrior>
  second: Partial<
    Record<
      Target,
      {
        says: (row: { features: Float64Array; answers: Float64Array }) => SecondSays
        treeWeight: number
        ridgeWeight: number
      }
    >
  >
}

/** Does once a house what need not be done once a forecast. */
export function readyHouse(house: HouseModel): ReadyHouse {
  const secondOf = (target: Target) => {
    const model = house.second?.[target]
    return model
      ? { says: secondPredictor(model), treeWeight: model.treeWeight, ridgeWeight: model.ridgeWeight }
      : undefined
  }
  const wrap = secondOf('wrap')
  const pull = secondOf('pull')
  return {
    house,
    priors: { juice: readyPrior(house.laws.juice), vapour: readyPrior(house.laws.vapour) },
    second: { ...(wrap ? { wrap } : {}), ...(pull ? { pull } : {}) },
  }
}

/** No forecast reaches further than this, seconds from now. */
export const furthestS = 36 * 3600

/** The state model's remaining times, seconds from now; undefined where most futures do not reach the target. */
export function remainingTimes(reachS: Float64Array, atS: number): ReachTimes | undefined {
  const remaining = reachS.map((value) => Math.min(furthestS, Math.max(60, value - atS)))
  const times = fiveQuantiles(remaining)
  return times.p50 >= furthestS ? undefined : times
}

export interface Answers {
  wrap: ReachTimes | undefined
  pull: ReachTimes | undefined
}

/** From drawn futures to what is said: blended with the second model, corrected by what past forecasts got wrong. */
export function answersOf(
  facts: CookFacts,
  cook: PreparedCook,
  futures: Futures,
  ready: ReadyHouse,
): { raw: Answers; said: Answers } {
  const raw: Answers = {
    wrap: cook.wrapReachedS === undefined ? remainingTimes(futures.wrapS, cook.atS) : undefined,
    pull: remainingTimes(futures.pullS, cook.atS),
  }
  const coreC = at(cook.core.coreC, cook.core.coreC.length - 1)
  const answers = answerFeatures(raw.wrap, raw.pull)
  const features = ready.second.wrap || ready.second.pull ? cookFeatures(facts, cook) : undefined
  const sayOf = (target: Target): ReachTimes | undefined => {
    const times = raw[target]
    if (!times) return undefined
    const second = ready.second[target]
    const blended =
      second && features
        ? stretch(
            times,
            blendMedian(times.p50, second.says({ features, answers }), second.treeWeight, second.ridgeWeight),
          )
        : times
    return correctTimes(ready.house.correction, target, coreC, blended)
  }
  const wrap = sayOf('wrap')
  const pull = sayOf('pull')
  // Where the pull lies above the wrap temperature it cannot come first, whatever two blends say apart.
  const ordered = wrap && pull && facts.pullAtC > facts.wrapAtC ? notBefore(pull, wrap) : pull
  return { raw, said: { wrap, pull: ordered } }
}

/** The same spread in the logarithm of time about another median. */
export function stretch(times: ReachTimes, medianS: number): ReachTimes {
  const factor = medianS / times.p50
  return {
    p10: times.p10 * factor,
    p25: times.p25 * factor,
    p50: medianS,
    p75: times.p75 * factor,
    p90: times.p90 * factor,
  }
}

function notBefore(pull: ReachTimes, wrap: ReachTimes): ReachTimes {
  return {
    p10: Math.max(pull.p10, wrap.p10),
    p25: Math.max(pull.p25, wrap.p25),
    p50: Math.max(pull.p50, wrap.p50),
    p75: Math.max(pull.p75, wrap.p75),
    p90: Math.max(pull.p90, wrap.p90),
  }
}
