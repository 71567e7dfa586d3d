import { createForecastPool, type ForecastPool } from '../../server/jobs/forecast-pool.ts'

/** Real worker threads, which get less time than any forecast takes while `isLate` says so. */
export function createLatePool(isLate: () => boolean): ForecastPool {
  const late = createForecastPool({ withinMs: 1 })
  const usual = createForecastPool()
  return {
    ...usual,
    forecast: (...task) => (isLate() ? late : usual).forecast(...task),
    stop: async () => {
      await Promise.all([late.stop(), usual.stop()])
    },
  }
}
