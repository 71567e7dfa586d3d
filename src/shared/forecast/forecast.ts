import { answersOf, readyHouse, remainingTimes, type ReadyHouse } from './answer.ts'
import { fanOf } from './fan.ts'
import { generalHouse } from './general-house.ts'
import { readPhase, type PhaseReading } from './phase.ts'
import { prepareCook, type PreparedCook } from './prepare-cook.ts'
import { stateForecast, type Scenario } from './state-forecast.ts'
import type { CookEvent, CookFacts, CookReadings, Forecast, NoForecastReason, ReachTimes } from './types.ts'

/**
 * The forecast of one piece. For a worker:
 *
 *     const house = readyHouse(model ?? generalHouse)      // once a house, after each learning
 *     forecastPiece(facts, readings, events, { atS, house }) // each piece each minute, and after an event
 *     forecastPiece(…, { atS, house, scenario: { pitSetC: 135 } })  // what-if
 *
 * It keeps nothing between calls: the same readings give the same answer, also after a restart. Readings may be as the
 * probe sent them or one a minute (cheaper), in time order, from the moment the piece went on. `learnHouse` in
 * `learn-house.ts` makes the model of a house from its finished cooks; it takes seconds and belongs in a job.
 */
export interface ForecastOptions {
  /** Now, seconds since the piece went on; left out, the last reading's time. Later readings and events are not seen. */
  atS?: number
  /** What the house has learned; left out, the general model. */
  house?: ReadyHouse
  scenario?: Scenario
  /** Leave the fan out where nobody draws it. */
  withFan?: boolean
}

/** A forecast with the reading of the cook's part that goes with it. */
export interface PieceForecast extends Forecast {
  reading: PhaseReading
}

const generalReady = readyHouse(generalHouse)
const leastValues = 2
const silentAfterS = 5400
const suspectAfterS = 2700
const pitUnknownAfterS = 3 * 3600

/** Says when a piece reaches its wrap and pull temperatures, or why it does not know. Times in seconds since it went on. */
export function forecastPiece(
  facts: CookFacts,
  readings: CookReadings,
  events: readonly CookEvent[],
  options: ForecastOptions = {},
): PieceForecast {
  const atS = options.atS ?? readings.elapsedS[readings.elapsedS.length - 1] ?? 0
  const house = options.house ?? generalReady
  const cook = prepareCook(facts, readings, events, atS)
  const reading = readPhase(facts, cook)
  const reached = cook.wrapReachedS === undefined ? {} : { wrapReachedS: cook.wrapReachedS }
  const start = { atS, phase: reading.phase, reading, ...reached }
  const reason = reasonNotToSay(cook)
  if (reason) {
    return {
      ...start,
      wrap: null,
      ...(cook.wrapReachedS === undefined ? { wrapReason: reason } : {}),
      pull: null,
      pullReason: reason,
      fan: [],
    }
  }
  const { futures } = stateForecast(facts, cook, house.house, house.priors, options.scenario)
  const { said } = answersOf(facts, cook, futures, house)
  const rawPull = remainingTimes(futures.pullS, atS)
  return {
    ...start,
    wrap: said.wrap ? later(said.wrap, atS) : null,
    ...(said.wrap || cook.wrapReachedS !== undefined ? {} : { wrapReason: 'will-not-reach' as const }),
    pull: said.pull ? later(said.pull, atS) : null,
    ...(said.pull ? {} : { pullReason: 'will-not-reach' as const }),
    fan:
      said.pull && rawPull && options.withFan !== false
        ? fanOf(futures, atS, facts.pullAtC, rawPull, said.pull)
        : [],
  }
}

function reasonNotToSay(cook: PreparedCook): NoForecastReason | undefined {
  if (cook.pullReachedS !== undefined) return 'already-pulled'
  if (cook.core.suspectSinceS !== undefined && cook.atS - cook.core.suspectSinceS > suspectAfterS)
    return 'probe-suspect'
  if (cook.core.timesS.length < leastValues) {
    return cook.lastCoreS === undefined && cook.atS > 1800 ? 'probe-silent' : 'too-little-data'
  }
  if (cook.lastCoreS === undefined || cook.atS - cook.lastCoreS > silentAfterS) return 'probe-silent'
  if (cook.pitReadS === undefined || cook.atS - cook.pitReadS > pitUnknownAfterS) return 'pit-unknown'
  return undefined
}

function later(times: ReachTimes, atS: number): ReachTimes {
  return {
    p10: atS + times.p10,
    p25: atS + times.p25,
    p50: atS + times.p50,
    p75: atS + times.p75,
    p90: atS + times.p90,
  }
}
