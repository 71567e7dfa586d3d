import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Clock } from '#shared/domain/clock.ts'
import type { JobKind } from '#shared/domain/job-schedule.ts'
import { ensurePartitions, livePartitionSpan } from '../db/partitions.ts'
import type { ForecastsService } from '../features/forecasts/service.ts'
import { dropOldPartitions } from '../history/drop-old-partitions.ts'
import { rollUpQuarters } from '../history/roll-up-quarters.ts'

export interface Chore {
  kind: JobKind
  /** How long after the start it is done for the first time, s. */
  firstAfterS: number
  /** Safe to do twice and to end half-way. */
  run: () => Promise<void>
}

export interface ChoreDeps {
  db: Knex
  databaseUrl: string
  clock: Clock
  log: Logger
  /** Readings as sent are kept for so many months; 0 keeps them for ever. */
  retentionMonths: number
  forecasts: Pick<ForecastsService, 'thin'>
  queue: { tidy: () => Promise<void> }
  learn: () => Promise<void>
}

const dayMs = 24 * 3600_000
/** Forecasts are kept as made for so long, then one a quarter of an hour. */
const keepAllMs = 30 * dayMs

/** What keeps the house's data in order, besides forecasts; when, says the schedule. */
export function createChores(deps: ChoreDeps): Chore[] {
  const { db, databaseUrl, clock, log, retentionMonths, forecasts, queue, learn } = deps
  return [
    {
      kind: 'roll-ups',
      firstAfterS: 5,
      run: async () => {
        await rollUpQuarters(db, { nowMs: clock.now() })
      },
    },
    {
      kind: 'retention',
      firstAfterS: 180,
      run: async () => {
        const gone = await dropOldPartitions(db, { databaseUrl, nowMs: clock.now(), retentionMonths })
        if (gone.dropped.length > 0) log.info(gone, 'Readings past their keeping are dropped')
      },
    },
    { kind: 'learning', firstAfterS: 2, run: learn },
    {
      kind: 'partitions',
      firstAfterS: 60,
      run: () => {
        const { fromMs, toMs } = livePartitionSpan(clock.now())
        return ensurePartitions(db, fromMs, toMs)
      },
    },
    {
      kind: 'thinning',
      firstAfterS: 300,
      run: async () => {
        const before = clock.now() - keepAllMs
        // What an earlier hour thinned stays thin: a week back is enough for a server that was off.
        await forecasts.thin(before - 7 * dayMs, before)
      },
    },
    { kind: 'tidying', firstAfterS: 120, run: queue.tidy },
  ]
}
