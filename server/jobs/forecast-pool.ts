import { Piscina } from 'piscina'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import type { Forecast } from '#shared/forecast/types.ts'
import type { AssembledCook } from '../features/forecasts/service.ts'

/** What a worker is asked. */
export type WorkerTask =
  { kind: 'forecast'; cook: AssembledCook; withFan: boolean } | { kind: 'learn'; cooks: AssembledCook[] }
export type WorkerAnswer = { kind: 'forecast'; forecast: Forecast } | { kind: 'learn'; house: HouseModel }

/** Threads that do the arithmetic, so that the one that takes readings never waits for it. */
export interface ForecastPool {
  /** From now on forecasts go by what a house's past cooks taught; before that, by the general model. */
  useHouse: (house: HouseModel) => void
  /**
   * Forecasts one piece as it stands.
   * @throws when the worker fails or takes too long; its thread is then replaced
   */
  forecast: (cook: AssembledCook, options?: { withFan?: boolean }) => Promise<Forecast>
  /** Learns from finished cooks. */
  learn: (cooks: readonly AssembledCook[]) => Promise<HouseModel>
  /** Gives up learning that is under way: it takes long, and can be done again. */
  stopLearning: () => Promise<void>
  /** Ends everything; call it when nothing is being forecast any more. */
  stop: () => Promise<void>
}

/** How long one forecast may take before its thread is given up, ms: a thousand times what it usually needs. */
const forecastWithinMs = 10_000
const learnWithinMs = 20 * 60_000

/** @param options.withinMs how long one forecast may take */
export function createForecastPool({
  withinMs = forecastWithinMs,
}: { withinMs?: number } = {}): ForecastPool {
  // Forecasts and learning have a thread each: learning takes long, and a piece may not wait for it.
  let forecasts = threads(null)
  const lessons = threads(null)
  const leaving = new Set<Promise<void>>()

  return {
    useHouse(house) {
      const old = forecasts
      forecasts = threads(house)
      const left = old.close().finally(() => leaving.delete(left))
      leaving.add(left)
    },
    async forecast(cook, { withFan = true } = {}) {
      const answer = await forecasts.run(
        { kind: 'forecast', cook, withFan },
        { signal: AbortSignal.timeout(withinMs) },
      )
      if (answer.kind !== 'forecast') throw new Error('The worker answered another question.')
      return answer.forecast
    },
    async learn(cooks) {
      const answer = await lessons.run(
        { kind: 'learn', cooks: [...cooks] },
        { signal: AbortSignal.timeout(learnWithinMs) },
      )
      if (answer.kind !== 'learn') throw new Error('The worker answered another question.')
      return answer.house
    },
    stopLearning: () => lessons.destroy(),
    stop: async () => {
      await Promise.all([forecasts.destroy(), lessons.destroy(), ...leaving])
    },
  }
}

function threads(house: HouseModel | null): Piscina<WorkerTask, WorkerAnswer> {
  return new Piscina<WorkerTask, WorkerAnswer>({
    filename: new URL('./forecast-worker.ts', import.meta.url).href,
    // The worker is TypeScript too, whatever loads the server's.
    execArgv: ['--import', 'tsx'],
    workerData: { house },
    minThreads: 0,
    maxThreads: 1,
    idleTimeout: 5 * 60_000,
  })
}
