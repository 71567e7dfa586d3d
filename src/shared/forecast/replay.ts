import { answersOf, type ReadyHouse } from './answer.ts'
import type { Target } from './correction.ts'
import { answerFeatures, cookFeatures } from './features.ts'
import type { FinishedCook } from './finished-cook.ts'
import { prepareCook } from './prepare-cook.ts'
import type { SecondRow } from './second-model.ts'
import { stateForecast } from './state-forecast.ts'
import type { ReachTimes } from './types.ts'

/** What the state model would have said at a moment of a finished cook, with the truth. */
export interface ReplayRow extends SecondRow {
  times: ReachTimes
}

export type Replay = Record<Target, ReplayRow[]>

const firstS = 1800

/** Walks through a finished cook as if it were under way and keeps what the state model alone says. */
export function replayCook(finished: FinishedCook, index: number, ready: ReadyHouse, everyS: number): Replay {
  const rows: Replay = { wrap: [], pull: [] }
  const { facts, readings, events, wrapReachedS, pullReachedS } = finished
  if (pullReachedS === undefined) return rows
  // Different cooks are met at different moments, so that no quarter of an hour is special.
  for (let atS = firstS + ((index * 300) % everyS); atS < pullReachedS - 120; atS += everyS) {
    const cook = prepareCook(facts, readings, events, atS)
    if (cook.core.timesS.length < 2) continue
    const { futures } = stateForecast(facts, cook, ready.house, ready.priors)
    const { raw } = answersOf(facts, cook, futures, ready)
    const features = cookFeatures(facts, cook)
    const answers = answerFeatures(raw.wrap, raw.pull)
    const add = (target: Target, reachedS: number | undefined) => {
      const times = raw[target]
      if (!times || reachedS === undefined || reachedS <= atS) return
      rows[target].push({ cook: index, features, answers, times, stateS: times.p50, truthS: reachedS - atS })
    }
    add('wrap', wrapReachedS)
    add('pull', pullReachedS)
  }
  return rows
}
