import { constants, platform, setPriority } from 'node:os'
import { workerData } from 'piscina'
import { z } from 'zod'
import { readyHouse } from '#shared/forecast/answer.ts'
import { forecastPiece } from '#shared/forecast/forecast.ts'
import { generalHouse } from '#shared/forecast/general-house.ts'
import type { FinishedCook } from '#shared/forecast/finished-cook.ts'
import { learnHouse } from '#shared/forecast/learn-house.ts'
import { createReachRule } from '#shared/forecast/reach-rule.ts'
import type { AssembledCook } from '../features/forecasts/assemble-cook.ts'
import type { WorkerAnswer, WorkerTask } from './forecast-pool.ts'
import { StoredHouse } from './stored-house.ts'

/** The house's model, or null for the general one. */
const { house } = z.object({ house: StoredHouse.nullable() }).parse(workerData)
const ready = readyHouse(house ?? generalHouse)

// Linux takes a priority for each thread: this one gives way to the one that takes readings.
if (platform() === 'linux') setPriority(constants.priority.PRIORITY_BELOW_NORMAL)

/** What runs off the main thread: the forecast of a piece, and learning from finished cooks. */
export default function run(task: WorkerTask): WorkerAnswer {
  if (task.kind === 'learn') {
    return { kind: 'learn', house: learnHouse(task.cooks.map(finished), { general: generalHouse }) }
  }
  const { facts, readings, events, atS } = task.cook
  const options = { atS, house: ready, withFan: task.withFan }
  return { kind: 'forecast', forecast: forecastPiece(facts, readings, events, options) }
}

function finished({ facts, readings, events }: AssembledCook): FinishedCook {
  const reach = createReachRule([facts.wrapAtC, facts.pullAtC])
  readings.elapsedS.forEach((elapsedS, index) => reach.add(elapsedS, readings.coreC[index] ?? Number.NaN))
  const [wrapReachedS, pullReachedS] = reach.reachedS
  return { facts, readings, events, wrapReachedS, pullReachedS }
}
