import { Instant } from '#shared/contract/common.ts'
import type { LatestForecast, PieceForecast } from '#shared/contract/forecast.ts'
import { badRequest } from '../../http/problem.ts'
import { createCookSource, type CookSourceDeps } from './cook-source.ts'
import { forecastsRepository, type ForecastToStore } from './repository.ts'

export { assembleCook, type AssembledCook } from './assemble-cook.ts'
export type { CookSource } from './cook-source.ts'
export type { CookRecord } from './cook-record.ts'
export type { ForecastToStore } from './repository.ts'

export type ForecastsService = ReturnType<typeof createForecastsService>

/** Forecasts as they were made, the newest of them, and what new ones are made from. */
export function createForecastsService({ db, readings }: CookSourceDeps) {
  return {
    cooks: createCookSource({ db, readings }),

    /** Keeps a forecast with its fan. @returns it as shown: with how far its pull moved in the last hour */
    async keep(forecast: ForecastToStore, fan: LatestForecast['fan']): Promise<LatestForecast | undefined> {
      await db.transaction(async (trx) => {
        const forecasts = forecastsRepository(trx)
        await forecasts.add([forecast])
        await forecasts.keepFan(forecast.pieceId, forecast.madeAt, fan)
      })
      return (await forecastsRepository(db).latestOf([forecast.pieceId]))[0]
    },

    /** Keeps forecasts of the past, without fans. */
    keepPast: (forecasts: readonly ForecastToStore[]): Promise<void> =>
      forecastsRepository(db).add(forecasts),

    latestOf: (pieceIds: readonly number[]): Promise<LatestForecast[]> =>
      pieceIds.length === 0 ? Promise.resolve([]) : forecastsRepository(db).latestOf(pieceIds),

    /** At most `limit` forecasts of a piece, newest first. */
    async list(
      pieceId: number,
      { cursor, limit }: { cursor?: string | undefined; limit: number },
    ): Promise<{ items: PieceForecast[]; nextCursor: string | null }> {
      if (cursor !== undefined && !Instant.safeParse(cursor).success) {
        throw badRequest('That cursor is not one of ours.')
      }
      const before = new Date(cursor ?? '9999-12-31T00:00:00Z')
      const found = await forecastsRepository(db).page(pieceId, before, limit + 1)
      const items = found.slice(0, limit)
      const last = found.length > limit ? items.at(-1) : undefined
      return { items, nextCursor: last?.madeAt ?? null }
    },

    /** Keeps one forecast a quarter of an hour of those made in a span (ms since 1970 UTC). @returns how many went */
    thin: (fromMs: number, beforeMs: number): Promise<number> =>
      forecastsRepository(db).thin(new Date(beforeMs), new Date(fromMs)),
  }
}
