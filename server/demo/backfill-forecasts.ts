import type { Knex } from 'knex'
import type { Logger } from 'pino'
import { z } from 'zod'
import type { Forecast } from '#shared/forecast/types.ts'
import {
  assembleCook,
  type CookRecord,
  type ForecastToStore,
  type ForecastsService,
} from '../features/forecasts/service.ts'
import { createForecastPool, type ForecastPool } from '../jobs/forecast-pool.ts'
import { modelName } from '../jobs/forecast-runner.ts'
import { afterPull, onCalendar } from '../jobs/stored-forecast.ts'

export interface BackfillDeps {
  db: Knex
  log: Logger
  forecasts: Pick<ForecastsService, 'cooks' | 'keepPast'>
  /** Pieces that went on before this (ms since 1970 UTC) were put in, not cooked before our eyes. */
  before: number
}

const quarterMs = 15 * 60_000
/** A probe needs a while before there is anything to say. */
const firstAfterMs = 30 * 60_000

/**
 * Says in the background what the general model would have said of the demo house's pieces at each quarter of an hour,
 * as it would have been kept. Each piece is done as a whole, so a restart goes on where it was left.
 * @returns stop; it resolves once nothing is under way any more
 */
export function backfillForecasts(deps: BackfillDeps): () => Promise<void> {
  const pool = createForecastPool()
  const ending = new AbortController()
  const { signal } = ending
  const done = (async () => {
    try {
      const pieces = await piecesWithout(deps)
      for (const pieceId of pieces) {
        const record = signal.aborted ? undefined : await deps.forecasts.cooks.recordOf(pieceId)
        if (record) await backfillPiece(deps, pool, record, signal)
      }
      if (pieces.length > 0 && !signal.aborted) {
        deps.log.info({ pieces: pieces.length }, 'Demo house: the forecasts of its past are there')
      }
    } catch (error) {
      if (!signal.aborted) deps.log.warn({ err: error }, 'Demo house: forecasts of its past are missing')
    } finally {
      await pool.stop()
    }
  })()
  return () => {
    ending.abort()
    return done
  }
}

async function backfillPiece(
  { forecasts, before }: BackfillDeps,
  pool: ForecastPool,
  record: CookRecord,
  signal: AbortSignal,
): Promise<void> {
  const until = Math.min(record.pulledAt ?? before, before)
  const lines = await forecasts.cooks.lines(record, until)
  const made: ForecastToStore[] = []
  const keep = (forecast: Forecast, madeAt: number) => {
    const said = onCalendar(forecast, { pieceId: record.pieceId, onAt: record.onAt, madeAt })
    made.push({ ...said.forecast, model: modelName(null) })
  }
  const first = Math.ceil((record.onAt + firstAfterMs) / quarterMs) * quarterMs
  for (let madeAt = first; madeAt < until; madeAt += quarterMs) {
    if (signal.aborted) return
    keep(await pool.forecast(assembleCook(record, lines, madeAt), { withFan: false }), madeAt)
  }
  if (record.pulledAt !== null && record.pulledAt <= before) {
    keep(afterPull(record, record.pulledAt, made.at(-1)?.wrapReachedAt ?? null), record.pulledAt)
  }
  await forecasts.keepPast(made)
}

/** Pieces with a probe that nothing was said about in their first two hours; those of tonight first. */
async function piecesWithout({ db, before }: BackfillDeps): Promise<number[]> {
  const answer: unknown = await db.raw(
    `select id from pieces p
     where on_at < :before and exists (select 1 from probe_placements where piece_id = p.id)
       and not exists (
         select 1 from forecasts where piece_id = p.id and made_at < p.on_at + interval '2 hours')
     order by id desc`,
    { before: new Date(before).toISOString() },
  )
  return z
    .object({ rows: z.array(z.object({ id: z.number() })) })
    .parse(answer)
    .rows.map((row) => row.id)
}
