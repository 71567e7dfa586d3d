import type { Broker } from '../broker/broker.ts'
import type { HealthSources } from './features/health/service.ts'
import type { JobsService } from './features/jobs/service.ts'
import type { Ingest } from './ingest/ingest.ts'
import type { LiveHub } from './live/hub.ts'

export interface HealthSourceDeps {
  broker: () => Broker | undefined
  ingest: Ingest
  live: () => LiveHub
  jobs: JobsService
  /** Whether this process does jobs; where not, what waits is not its fault. */
  runsJobs: boolean
}

/** Asks the parts of the server how they are, in words for a person. */
export function healthSources({ broker, ingest, live, jobs, runsJobs }: HealthSourceDeps): HealthSources {
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
    live: () => {
      const connections = live().connections()
      const detail = connections === 1 ? '1 page watches' : `${connections} pages watch`
      return { ok: true, detail, connections }
    },
    work: async () => {
      const told = await jobs.health()
      if (runsJobs) return told
      const elsewhere = { ok: true, detail: 'not run by this process' }
      return { forecast: { ...told.forecast, ...elsewhere }, jobs: { ...told.jobs, ...elsewhere } }
    },
  }
}
