import { performance } from 'node:perf_hooks'
import { parseCronItems, type JobHelpers, type TaskList } from 'graphile-worker'
import type { Knex } from 'knex'
import type { Logger } from 'pino'
import { z } from 'zod'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { isTurn, jobKinds, jobTurns, type JobKind } from '#shared/domain/job-schedule.ts'
import type { ForecastsService } from '../features/forecasts/service.ts'
import { jobsRepository } from '../features/jobs/service.ts'
import { createChores } from './chores.ts'
import { every } from './every.ts'
import { createForecastPool, type ForecastPool } from './forecast-pool.ts'
import { createForecastRunner } from './forecast-runner.ts'
import { createLearning } from './learning.ts'
import { createRunLog } from './run-log.ts'
import { startWorkerGroup } from './worker-group.ts'

export interface JobsDeps {
  db: Knex
  /** For the connections that hear of jobs, take them and return them. */
  databaseUrl: string
  clock: Clock
  log: Logger
  forecasts: ForecastsService
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
  /** Readings as sent are kept for so many months; 0 keeps them for ever. */
  retentionMonths?: number | undefined
  /** Whether the clock asks for jobs too, or only people and events do, as some tests want. */
  byTheClock?: boolean | undefined
  /** How often what dead processes left is looked for, and how long a process may take to show that it lives. */
  sweep?: { everyMs: number; graceS: number } | undefined
  /** Makes the threads that do the arithmetic. */
  makePool?: (() => ForecastPool) | undefined
}

export interface Jobs {
  /** Resolves once nothing runs any more. */
  stop: () => Promise<void>
}

const usualRetentionMonths = 13
/** Space of the advisory locks by which processes know of each other. */
const presenceLock = 7266
/** What a process that died was doing is done again after at most the two together. */
const usualSweep = { everyMs: 5000, graceS: 10 }
/** A forecast that another process is making just now is made again after it, s. */
const putOffS = 1
/** What each minute's round asks for; what is due at once goes before it. */
const roundPriority = 0

const ForecastPayload = z.object({ pieceId: z.number() })

/**
 * Starts this process's share of what runs without a request. Jobs stand in a queue in the database, so any process
 * may do them and none is done twice at once; the clock's turns are put there by one process, and turns that nobody
 * was there for are not made up for. Each job may be done twice or end half-way without harm.
 */
export function startJobs(deps: JobsDeps): Jobs {
  const { db, databaseUrl, clock, log, forecasts, publish } = deps
  const {
    retentionMonths = usualRetentionMonths,
    byTheClock = true,
    sweep = usualSweep,
    makePool = createForecastPool,
  } = deps
  const pool = makePool()
  const queue = jobsRepository(db)
  const runs = createRunLog({ keep: (kept) => queue.keepRuns(kept), log })
  const learning = createLearning({ db, clock, log, cooks: forecasts.cooks, pool })
  const runner = createForecastRunner({
    ...{ clock, forecasts, pool, publish },
    cooks: forecasts.cooks,
    house: learning.house,
  })
  const chores = createChores({
    ...{ db, databaseUrl, clock, log, retentionMonths, forecasts, queue },
    learn: learning.learn,
  })
  let isStopping = false

  /** Writes down how each run of a kind went. A task answers `left` when another is at it already. */
  const noted =
    (kind: JobKind, task: (payload: unknown, helpers: JobHelpers) => Promise<'left' | undefined>) =>
    async (payload: unknown, helpers: JobHelpers): Promise<void> => {
      const begun = performance.now()
      try {
        if ((await task(payload, helpers)) !== 'left') runs.note(kind, performance.now() - begun)
      } catch (error) {
        // What is broken off by stopping did not fail.
        if (!isStopping) runs.note(kind, performance.now() - begun, error)
        throw error
      }
    }

  const forecastTasks: TaskList = {
    forecast: noted('forecast', async (payload, { job }) => {
      const { pieceId } = ForecastPayload.parse(payload)
      if (await queue.isBusy(job.id, 'forecast', pieceId)) {
        await queue.putOff(pieceId, putOffS)
        return 'left'
      }
      await learning.load()
      await runner.run(pieceId)
      return undefined
    }),
    'forecast-round': noted('forecast-round', async () => {
      const pieces = await forecasts.cooks.toForecast()
      await queue.strikeGivenUp('forecast')
      await queue.addForecasts(pieces, roundPriority)
      return undefined
    }),
  }

  const choreTasks: TaskList = Object.fromEntries(
    chores.map(({ kind, run }) => [
      kind,
      noted(kind, async (_, { job }) => {
        // It is being done already; the next turn will do what is left.
        if (await queue.isBusy(job.id, kind, null)) return 'left'
        await run()
        await queue.strikeGivenUp(kind, job.id)
        return undefined
      }),
    ]),
  )

  const common = { databaseUrl, log, presenceLock }
  const groups = [
    // Hands of their own, so that no chore keeps a forecast waiting: one piece's readings are fetched while the
    // thread is busy with another's.
    startWorkerGroup({ ...common, name: 'forecasts', tasks: forecastTasks, hands: 2 }),
    startWorkerGroup({
      ...common,
      name: 'chores',
      tasks: choreTasks,
      hands: 2,
      cron: byTheClock ? clockTurns() : [],
    }),
  ]
  const stopSweeping = every(
    { name: 'Looking for what dead processes left', intervalMs: sweep.everyMs, log },
    async () => {
      const dead = await queue.releaseDead(presenceLock, sweep.graceS)
      if (dead > 0) log.warn({ dead }, 'What a process that died was doing is done again')
    },
  )
  // What may have been missed while no process was there: once each, not once for every missed turn.
  const stopFirst = every({ name: 'Asking for the first jobs', intervalMs: sweep.everyMs, log }, async () => {
    await queue.add('forecast-round')
    if (byTheClock) for (const { kind, firstAfterS } of chores) await queue.add(kind, { afterS: firstAfterS })
    void stopFirst()
  })

  return {
    async stop() {
      isStopping = true
      await Promise.all([stopSweeping(), stopFirst()])
      await Promise.all([...groups.map((group) => group.stop()), pool.stopLearning()])
      await pool.stop()
      await runs.stop()
    },
  }
}

/** The schedule in the queue's form. Turns in the past are never made up for. */
function clockTurns() {
  return parseCronItems(
    jobKinds.flatMap((kind) => {
      const turns = jobTurns[kind]
      if (!turns) return []
      return {
        task: kind,
        identifier: kind,
        match: ({ hour, min }: { hour: number; min: number }) => isTurn(turns, hour * 60 + min),
        options: { backfillPeriod: 0, maxAttempts: 5, jobKey: kind, jobKeyMode: 'preserve_run_at' as const },
      }
    }),
  )
}
