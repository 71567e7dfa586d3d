import type { Knex } from 'knex'
import { z } from 'zod'
import {
  FanSliceView,
  NoForecastReason,
  type LatestForecast,
  type PieceForecast,
  type ReachInstants,
} from '#shared/contract/forecast.ts'
import { phases } from '#shared/domain/cooking.ts'

/** A forecast as made, with the name of the model that made it. */
export type ForecastToStore = PieceForecast & { model: string }

export function forecastsRepository(db: Knex) {
  return {
    /** Keeps forecasts as made; one that is there already stays. */
    async add(forecasts: readonly ForecastToStore[]): Promise<void> {
      for (let start = 0; start < forecasts.length; start += 1000) {
        await db('forecasts')
          .insert(forecasts.slice(start, start + 1000).map(rowOf))
          .onConflict(['piece_id', 'made_at'])
          .ignore()
      }
    },

    /** Keeps the fan of a piece's newest forecast in place of the one before. */
    async keepFan(pieceId: number, madeAt: string, fan: LatestForecast['fan']): Promise<void> {
      await db('forecast_fans')
        .insert({ piece_id: pieceId, made_at: madeAt, fan: JSON.stringify(fan) })
        .onConflict('piece_id')
        .merge()
    },

    /** The newest forecast of each piece that has one, with its fan and how far its pull moved in the last hour. */
    async latestOf(pieceIds: readonly number[]): Promise<LatestForecast[]> {
      const answer: unknown = await db.raw(
        `select newest.*, f.fan, extract(epoch from newest.pull_quantiles[3] - earlier.pull_p50) / 60.0 as moved
         from unnest(?::int[]) as wanted (piece_id)
         join lateral (
           select * from forecasts where piece_id = wanted.piece_id order by made_at desc limit 1
         ) newest on true
         left join forecast_fans f on f.piece_id = newest.piece_id and f.made_at = newest.made_at
         left join lateral (
           select pull_quantiles[3] as pull_p50 from forecasts
           where piece_id = newest.piece_id
             and made_at between newest.made_at - interval '80 minutes' and newest.made_at - interval '59 minutes'
           order by made_at desc limit 1
         ) earlier on true`,
        [[...pieceIds]],
      )
      return LatestRows.parse(answer).rows.map((row) => ({
        ...forecastOf(row),
        fan: row.fan ?? [],
        pullMovedMin: row.moved === null ? null : Math.round(row.moved),
      }))
    },

    /** At most `limit` forecasts of a piece made before a moment, newest first. */
    async page(pieceId: number, before: Date, limit: number): Promise<PieceForecast[]> {
      const answer: unknown = await db.raw(
        `select * from forecasts where piece_id = ? and made_at < ? order by made_at desc limit ?`,
        [pieceId, before.toISOString(), limit],
      )
      return ForecastRows.parse(answer).rows.map(forecastOf)
    },

    /** Keeps one forecast a quarter of an hour (its last) of those made before a moment. @returns how many went */
    async thin(before: Date, since: Date): Promise<number> {
      const answer: unknown = await db.raw(
        `delete from forecasts old using forecasts later
         where old.made_at >= :since and old.made_at < :before
           and later.piece_id = old.piece_id and later.made_at > old.made_at
           and later.made_at < date_bin('15 minutes', old.made_at, 'epoch') + interval '15 minutes'`,
        { before: before.toISOString(), since: since.toISOString() },
      )
      return z.object({ rowCount: z.number() }).parse(answer).rowCount
    },
  }
}

const ForecastRow = z.object({
  piece_id: z.number(),
  made_at: z.date(),
  phase: z.enum(phases),
  wrap_quantiles: z.array(z.date()).length(5).nullable(),
  wrap_reason: NoForecastReason.nullable(),
  wrap_reached_at: z.date().nullable(),
  pull_quantiles: z.array(z.date()).length(5).nullable(),
  pull_reason: NoForecastReason.nullable(),
})
const ForecastRows = z.object({ rows: z.array(ForecastRow) })
const LatestRows = z.object({
  rows: z.array(
    ForecastRow.extend({
      fan: z.array(FanSliceView).nullable(),
      moved: z.coerce.number().nullable(),
    }),
  ),
})

function forecastOf(row: z.infer<typeof ForecastRow>): PieceForecast {
  return {
    pieceId: row.piece_id,
    madeAt: row.made_at.toISOString(),
    phase: row.phase,
    wrap: instants(row.wrap_quantiles),
    wrapReason: row.wrap_reason,
    wrapReachedAt: row.wrap_reached_at?.toISOString() ?? null,
    pull: instants(row.pull_quantiles),
    pullReason: row.pull_reason,
  }
}

function instants(quantiles: Date[] | null): ReachInstants | null {
  const [p10, p25, p50, p75, p90] = (quantiles ?? []).map((moment) => moment.toISOString())
  if (p10 === undefined || p25 === undefined || p50 === undefined || p75 === undefined || p90 === undefined) {
    return null
  }
  return { p10, p25, p50, p75, p90 }
}

function rowOf(forecast: ForecastToStore) {
  return {
    piece_id: forecast.pieceId,
    made_at: forecast.madeAt,
    phase: forecast.phase,
    wrap_quantiles: quantiles(forecast.wrap),
    wrap_reason: forecast.wrapReason,
    wrap_reached_at: forecast.wrapReachedAt,
    pull_quantiles: quantiles(forecast.pull),
    pull_reason: forecast.pullReason,
    model: forecast.model,
  }
}

function quantiles(reach: ReachInstants | null): string[] | null {
  return reach && [reach.p10, reach.p25, reach.p50, reach.p75, reach.p90]
}
