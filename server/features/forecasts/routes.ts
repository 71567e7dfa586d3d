import { forecastEndpoints } from '#shared/contract/forecast.ts'
import type { Mount } from '../../http/mount.ts'
import type { ForecastsService } from './service.ts'

export function forecastRoutes(mount: Mount, { forecasts }: { forecasts: ForecastsService }): void {
  mount(forecastEndpoints.ofPiece, ({ params, query }) => forecasts.list(params.pieceId, query))
}
