import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import type { Forecast } from '#shared/forecast/types.ts'
import type { CookRecord, CookSource, ForecastsService } from '../features/forecasts/service.ts'
import type { ForecastPool } from './forecast-pool.ts'
import { afterPull, onCalendar } from './stored-forecast.ts'

export interface RunnerDeps {
  clock: Clock
  cooks: Pick<CookSource, 'recordOf' | 'assemble'>
  forecasts: Pick<ForecastsService, 'keep' | 'latestOf'>
  pool: Pick<ForecastPool, 'forecast'>
  /** What the house's past cooks taught; null for the general model. */
  house: () => HouseModel | null
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
}

export type ForecastRunner = ReturnType<typeof createForecastRunner>

/** Forecasts pieces and keeps what was said. That a piece is never forecast twice at once, the queue sees to. */
export function createForecastRunner({ clock, cooks, forecasts, pool, house, publish }: RunnerDeps) {
  /** @throws what stood in the way */
  async function run(pieceId: number): Promise<void> {
    const record = await cooks.recordOf(pieceId)
    if (!record) return
    const madeAt = clock.now()
    const answer = await answerFor(record, madeAt)
    if (!answer) return
    const { forecast, fan } = onCalendar(answer, { pieceId, onAt: record.onAt, madeAt })
    const kept = await forecasts.keep({ ...forecast, model: modelName(house()) }, fan)
    if (kept) publish(record.site, { forecasts: [kept] })
  }

  /** What there is to say of a piece; undefined when it has been said. */
  async function answerFor(record: CookRecord, now: number): Promise<Forecast | undefined> {
    if (record.pulledAt !== null) {
      const [last] = await forecasts.latestOf([record.pieceId])
      const isSaid = last?.pullReason === 'already-pulled' && Date.parse(last.madeAt) >= record.pulledAt
      if (isSaid) return undefined
      return afterPull(record, now, last?.wrapReachedAt ?? null)
    }
    // A piece without a probe of its own goes by a sibling, or by the clock: there is nothing to fit.
    if (record.core.length === 0) return withoutProbe(record, now)
    return pool.forecast(await cooks.assemble(record, now))
  }

  return { run }
}

/** Which model said it: its version, and from how many of the house's cooks it learned. */
export function modelName(house: HouseModel | null): string {
  return `state-1, ${house?.cooks ?? 0} cooks`
}

function withoutProbe(record: CookRecord, now: number): Forecast {
  return {
    atS: (now - record.onAt) / 1000,
    phase: record.wraps.length > 0 ? 'wrapped' : 'rise',
    wrap: null,
    wrapReason: 'no-probe',
    pull: null,
    pullReason: 'no-probe',
    fan: [],
  }
}
