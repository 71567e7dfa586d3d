import type { WrapMethod } from '../domain/cooking.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { at } from './small-matrix.ts'
import type { CookFacts, ReachTimes } from './types.ts'

/** What the second model looks at. The state model enters by its medians and spreads only, never its parameters. */
export function cookFeatures(facts: CookFacts, cook: PreparedCook): Float64Array {
  const { timesS, coreC } = cook.core
  const now = at(coreC, coreC.length - 1)
  const nowS = at(timesS, timesS.length - 1)
  const since = (target: number) => {
    for (let i = 0; i < coreC.length; i++)
      if (at(coreC, i) >= target) return (cook.atS - at(timesS, i)) / 3600
    return -0.5
  }
  const slope = (windowS: number) => {
    for (let i = coreC.length - 2; i >= 0; i--) {
      if (at(timesS, i) <= nowS - windowS || i === 0) {
        return ((now - at(coreC, i)) * 3600) / Math.max(300, nowS - at(timesS, i))
      }
    }
    return 10
  }
  const pitMean = (windowS: number) => {
    const from = Math.max(0, Math.floor((cook.atS - windowS) / 600))
    let sum = 0
    for (let k = from; k < cook.steps; k++) sum += at(cook.pitC, k)
    return sum / Math.max(1, cook.steps - from)
  }
  const method: WrapMethod = cook.wrappedWith ?? facts.wrapMethod
  return Float64Array.of(
    now,
    Math.log(cook.atS / 3600),
    clip(slope(1200), -5, 40),
    clip(slope(2400), -5, 40),
    clip(slope(4800), -5, 40),
    clip(slope(9000), -5, 40),
    since(25),
    since(40),
    since(50),
    since(60),
    since(66),
    pitMean(3600),
    pitMean(1e9),
    cook.setC,
    Math.log(facts.rawKg),
    facts.cured ? 1 : 0,
    facts.cookerKind === 'offset' ? 1 : 0,
    facts.cookerKind === 'rotisserie' ? 1 : 0,
    method === 'none' ? 1 : 0,
    method === 'foil' ? 1 : 0,
    method === 'boat' ? 1 : 0,
    cook.wrapS === undefined ? 0 : 1,
    cook.wrapS === undefined ? -0.5 : Math.min(3, (cook.atS - cook.wrapS) / 3600),
    facts.wrapAtC - now,
    facts.pullAtC - now,
  )
}

/** The state model's answer as features: logarithms of the remaining median and of the spread. */
export function answerFeatures(wrap: ReachTimes | undefined, pull: ReachTimes | undefined): Float64Array {
  const ofTarget = (times: ReachTimes | undefined) =>
    times && Number.isFinite(times.p90)
      ? [Math.log(times.p50), Math.log(times.p90 / Math.max(1, times.p10))]
      : [0, 0]
  return Float64Array.from([...ofTarget(wrap), ...ofTarget(pull)])
}

function clip(value: number, low: number, high: number): number {
  return Math.min(high, Math.max(low, value))
}
