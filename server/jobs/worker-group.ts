import { EventEmitter, once } from 'node:events'
import { setTimeout } from 'node:timers/promises'
import {
  Logger as QueueLogger,
  run,
  type ParsedCronItem,
  type TaskList,
  type WorkerEvents,
} from 'graphile-worker'
import pg from 'pg'
import type { Logger } from 'pino'

export interface WorkerGroupOptions {
  /** What it is called in the log. */
  name: string
  databaseUrl: string
  log: Logger
  tasks: TaskList
  /** How many jobs it does at once. */
  hands: number
  /** What it puts into the queue by the clock; of several processes one does. */
  cron?: ParsedCronItem[]
  /** The number space of the locks by which others know that this process lives. */
  presenceLock: number
}

export interface WorkerGroup {
  /** Ends what is being done, for as long as that takes within a deadline; what takes longer is done again later. */
  stop: () => Promise<void>
}

/** How long a group that broke down waits before it begins anew, ms. */
const againMs = 2000
/** How long what is being done may take to end, ms. */
const farewellMs = 8000

/**
 * Takes jobs from the queue and does them, until stopped. Is the database away, it waits for it. It has a small pool
 * of connections of its own: one that hears of new jobs, one that shows others that it lives, and one for each hand
 * that takes or returns a job.
 */
export function startWorkerGroup(options: WorkerGroupOptions): WorkerGroup {
  const { name, log } = options
  const leaving = new AbortController()
  const ended = keepRunning(leaving.signal)

  async function keepRunning(stop: AbortSignal): Promise<void> {
    let isTold = false
    while (!stop.aborted) {
      try {
        await work(options, stop, () => {
          isTold = false
        })
      } catch (error) {
        // Once an outage.
        log[isTold ? 'debug' : 'warn'](
          { err: error },
          `The ${name} stopped; they begin anew as soon as they can`,
        )
        isTold = true
      }
      await pause(againMs, stop)
    }
  }

  return {
    async stop() {
      leaving.abort()
      await ended
    },
  }
}

/** One run from connecting to breaking down or being stopped. */
async function work(options: WorkerGroupOptions, stop: AbortSignal, onBegun: () => void): Promise<void> {
  const { databaseUrl, log, tasks, hands, cron = [], presenceLock } = options
  const pool = new pg.Pool({
    connectionString: databaseUrl,
    max: hands + 2,
    application_name: 'coalhand jobs',
    keepAlive: true,
    connectionTimeoutMillis: 5000,
  })
  const lost = (error: Error) => log.debug({ err: error }, 'A connection of the jobs was lost')
  pool.on('error', lost)
  pool.on('connect', (client) => client.on('error', lost))
  const events: WorkerEvents = new EventEmitter()
  let presence: Promise<void> | undefined
  const leaving = new AbortController()
  events.on('pool:create', ({ workerPool }) => {
    presence = showPresence({ pool, lock: [presenceLock, workerPool.id], leaving: leaving.signal })
  })
  try {
    const runner = await run({
      pgPool: pool,
      taskList: tasks,
      parsedCronItems: cron,
      concurrency: hands,
      noHandleSignals: true,
      logger: new QueueLogger(() => (level, message) => {
        // What heals itself is a warning, and what goes well is nobody's news.
        if (isLoud.has(level)) log.warn(message)
        else log.debug(message)
      }),
      events,
      preset: {
        worker: {
          // Only then is a job whose end could not be written down at once written down later, instead of ending all.
          completeJobBatchDelay: 0,
          failJobBatchDelay: 0,
          gracefulShutdownAbortTimeout: farewellMs,
        },
      },
    })
    onBegun()
    await Promise.race([runner.promise, aborted(stop)])
    await Promise.race([runner.stop().catch(() => undefined), pause(farewellMs)])
  } finally {
    leaving.abort()
    await presence
    await Promise.race([pool.end(), pause(1000)])
  }
}

/**
 * Holds a lock for as long as this process lives: it goes with its connection, so whoever finds it free takes the
 * process for dead. It is shared, because a connection that broke may not be gone yet when its successor comes.
 */
async function showPresence({ pool, lock, leaving }: Presence): Promise<void> {
  while (!leaving.aborted) {
    try {
      const client = await pool.connect()
      try {
        const broken = once(client, 'end').catch(() => undefined)
        await client.query('select pg_advisory_lock_shared($1, hashtext($2))', lock)
        await Promise.race([broken, aborted(leaving)])
      } finally {
        client.release(true)
      }
    } catch {
      // The database is away; the workers say so.
    }
    await pause(1000, leaving)
  }
}

interface Presence {
  pool: pg.Pool
  lock: [space: number, workers: string]
  leaving: AbortSignal
}

/** Waits so long, or until a signal. */
function pause(ms: number, until?: AbortSignal): Promise<void> {
  return setTimeout(ms, undefined, { ref: false, ...(until && { signal: until }) }).catch(() => undefined)
}

function aborted(signal: AbortSignal): Promise<void> {
  return new Promise((resolve) => {
    if (signal.aborted) resolve()
    signal.addEventListener('abort', () => resolve(), { once: true })
  })
}

const isLoud = new Set<string>(['error', 'warning'])
