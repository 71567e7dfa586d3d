import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Health } from '#shared/contract/health.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { ensurePartitions, livePartitionSpan } from '../db/partitions.ts'
import type { ForecastsService } from '../features/forecasts/service.ts'
import { pieceChannel } from '../features/pieces/service.ts'
import { every } from './every.ts'
import { createForecastPool } from './forecast-pool.ts'
import { createForecastRunner } from './forecast-runner.ts'
import { createLearning } from './learning.ts'
import { takeTurns } from './scheduler-duty.ts'

export interface JobsDeps {
  db: Knex
  /** For the connection that holds the duty's lock and hears of changed pieces. */
  databaseUrl: string
  clock: Clock
  log: Logger
  forecasts: ForecastsService
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
  /** How often every piece is forecast, ms. */
  everyMs?: number | undefined
}

export interface Jobs {
  health: () => Health['forecast']
  /** Resolves once nothing runs any more. */
  stop: () => Promise<void>
}

const minuteMs = 60_000
const hourMs = 60 * minuteMs
const dayMs = 24 * hourMs
/** Forecasts are kept as made for so long, then one a quarter of an hour. */
const keepAllMs = 30 * dayMs

/** Starts what runs without a request: forecasts, learning, thinning, partitions. One server process does it at a time. */
export function startJobs(deps: JobsDeps): Jobs {
  const { db, databaseUrl, clock, log, forecasts, publish, everyMs = minuteMs } = deps
  const pool = createForecastPool()
  const { cooks } = forecasts
  const learning = createLearning({ db, clock, log, cooks, pool })
  const runner = createForecastRunner({ clock, log, cooks, forecasts, pool, house: learning.house, publish })

  const begin = () => {
    const stops = [
      every({ name: 'The round of forecasts', intervalMs: everyMs, log }, async () => {
        await learning.load()
        await runner.runAll()
      }),
      every({ name: 'Learning', intervalMs: 10 * minuteMs, firstAfterMs: 2000, log }, learning.learn),
      every({ name: 'Making partitions', intervalMs: dayMs, firstAfterMs: minuteMs, log }, () => {
        const { fromMs, toMs } = livePartitionSpan(clock.now())
        return ensurePartitions(db, fromMs, toMs)
      }),
      every(
        { name: 'Thinning old forecasts', intervalMs: hourMs, firstAfterMs: 5 * minuteMs, log },
        async () => {
          const before = clock.now() - keepAllMs
          // What an earlier hour thinned stays thin: a week back is enough for a server that was off.
          await forecasts.thin(before - 7 * dayMs, before)
        },
      ),
    ]
    return async () => {
      await Promise.all(stops.map((stop) => stop()))
      await runner.idle()
    }
  }

  const duty = takeTurns({
    databaseUrl,
    log,
    begin,
    channel: pieceChannel,
    heard: (payload) => {
      const pieceId = Number(payload)
      if (Number.isInteger(pieceId)) void runner.run(pieceId)
    },
  })

  return {
    health() {
      const { endedAt, pieces, failed, lastRunMs } = runner.state()
      if (!duty.isOn())
        return { ok: true, detail: 'another process runs the forecasts', pieces: 0, lastRunMs: null }
      const isLate = endedAt !== null && clock.now() - endedAt > 3 * everyMs
      const detail =
        endedAt === null
          ? 'the first round is under way'
          : isLate
            ? 'the round of forecasts is late'
            : failed > 0
              ? `${failed} of ${pieces} pieces could not be forecast`
              : `${pieces} pieces forecast`
      return { ok: !isLate && failed === 0, detail, pieces, lastRunMs }
    },
    async stop() {
      await Promise.all([duty.stop(), pool.stopLearning()])
      await pool.stop()
    },
  }
}
