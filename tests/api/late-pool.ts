import { createForecastPool, type ForecastPool } from '../../server/jobs/forecast-pool.ts'

/** Real worker threads, which get less time than any forecast takes while `isLate` says so. */
export function createLatePool(isLate: () => boolean): ForecastPool {
  const usual = createForecastPool()
  const lates: ForecastPool[] = []
  return {
    ...usual,
    forecast: (...task) => {
      if (!isLate()) return usual.forecast(...task)
      // Each time a thread that has yet to start: one that runs already may answer within a millisecond or two.
      const late = createForecastPool({ withinMs: 1 })
      lates.push(late)
      return late.forecast(...task)
    },
    stop: async () => {
      await Promise.all([usual, ...lates].map((pool) => pool.stop()))
    },
  }
}
