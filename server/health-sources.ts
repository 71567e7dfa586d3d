import type { Broker } from '../broker/broker.ts'
import type { HealthSources } from './features/health/service.ts'
import type { Ingest } from './ingest/ingest.ts'
import type { Jobs } from './jobs/start-jobs.ts'

export interface HealthSourceDeps {
  broker: () => Broker | undefined
  ingest: Ingest
  jobs: () => Jobs | undefined
}

/** Asks the parts of the server how they are, in words for a person. */
export function healthSources({ broker, ingest, jobs }: HealthSourceDeps): HealthSources {
  return {
    broker: () => {
      const running = broker()
      if (!running) return { ok: false, detail: 'not running', clients: 0 }
      return { ok: true, detail: `listens on port ${running.port}`, clients: running.clients() }
    },
    ingest: () => {
      const { databaseOk, waiting, delayMedianMs, delayP99Ms } = ingest.metrics()
      const detail = databaseOk ? 'stores what comes' : 'waits for the database'
      return { ok: databaseOk, detail, waiting, delayMedianMs, delayP99Ms }
    },
    forecast: () =>
      jobs()?.health() ?? { ok: true, detail: 'not run by this process', pieces: 0, lastRunMs: null },
  }
}
