import { z } from 'zod'
import { phases } from '../domain/cooking.ts'
import { noForecastReasons } from '../forecast/types.ts'
import { Celsius, Id, Instant, NoBody, PageQuery, PathId, pageOf } from './common.ts'
import { atSite, endpoint } from './endpoint.ts'

/** When a temperature will be reached: the 10th, 25th, 50th, 75th and 90th percentile. 80 % lies between p10 and p90. */
export const ReachInstants = z
  .object({ p10: Instant, p25: Instant, p50: Instant, p75: Instant, p90: Instant })
  .meta({ id: 'ReachInstants' })
export type ReachInstants = z.infer<typeof ReachInstants>

export const NoForecastReason = z.enum(noForecastReasons)

/** The core temperature's coming distribution at one moment. */
export const FanSliceView = z.object({
  at: Instant,
  p10: Celsius,
  p25: Celsius,
  p50: Celsius,
  p75: Celsius,
  p90: Celsius,
})

export const PieceForecast = z
  .object({
    pieceId: Id,
    madeAt: Instant,
    phase: z.enum(phases),
    wrap: ReachInstants.nullable(),
    wrapReason: NoForecastReason.nullable(),
    /** When the readings reached the wrap temperature; then `wrap` is null without a reason. */
    wrapReachedAt: Instant.nullable(),
    pull: ReachInstants.nullable(),
    pullReason: NoForecastReason.nullable(),
  })
  .meta({ id: 'Forecast' })
export type PieceForecast = z.infer<typeof PieceForecast>

/** The newest forecast of a piece, with its fan and how far its pull moved in the last hour. */
export const LatestForecast = PieceForecast.extend({
  fan: z.array(FanSliceView),
  /** Minutes by which the pull's median is later than an hour ago; null when there was none then. */
  pullMovedMin: z.number().nullable(),
}).meta({ id: 'LatestForecast' })
export type LatestForecast = z.infer<typeof LatestForecast>

export const forecastEndpoints = {
  ofPiece: endpoint({
    method: 'get',
    path: '/api/pieces/:pieceId/forecasts',
    tag: 'Forecasts',
    summary: 'The forecasts of a piece as they were made, newest first',
    access: atSite('history.view', 'pieceId'),
    params: z.object({ pieceId: PathId }),
    query: PageQuery,
    body: NoBody,
    response: pageOf(PieceForecast),
    status: 200,
  }),
}
