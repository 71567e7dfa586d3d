import type { LatestForecast, PieceForecast, ReachInstants } from '#shared/contract/forecast.ts'
import type { Forecast, ReachTimes } from '#shared/forecast/types.ts'

/**
 * A forecast on the calendar: the model counts seconds since the piece went on.
 * @param onAt when it went on, `madeAt` when this was said, ms since 1970 UTC
 */
export function onCalendar(
  forecast: Forecast,
  { pieceId, onAt, madeAt }: { pieceId: number; onAt: number; madeAt: number },
): { forecast: PieceForecast; fan: LatestForecast['fan'] } {
  const instant = (elapsedS: number) => new Date(Math.round(onAt + elapsedS * 1000)).toISOString()
  const instants = (times: ReachTimes | null): ReachInstants | null =>
    times && {
      p10: instant(times.p10),
      p25: instant(times.p25),
      p50: instant(times.p50),
      p75: instant(times.p75),
      p90: instant(times.p90),
    }
  return {
    forecast: {
      pieceId,
      madeAt: new Date(madeAt).toISOString(),
      phase: forecast.phase,
      wrap: instants(forecast.wrap),
      wrapReason: forecast.wrapReason ?? null,
      wrapReachedAt: forecast.wrapReachedS === undefined ? null : instant(forecast.wrapReachedS),
      pull: instants(forecast.pull),
      pullReason: forecast.pullReason ?? null,
    },
    fan: forecast.fan.map(({ atS, ...quantiles }) => ({ at: instant(atS), ...quantiles })),
  }
}

/** What is said last of a piece: it was pulled. Moments in ms since 1970 UTC, `wrapReachedAt` as it was last said. */
export function afterPull({ onAt }: { onAt: number }, now: number, wrapReachedAt: string | null): Forecast {
  const said: Forecast = {
    atS: (now - onAt) / 1000,
    phase: 'done',
    wrap: null,
    pull: null,
    pullReason: 'already-pulled',
    fan: [],
  }
  return wrapReachedAt === null
    ? { ...said, wrapReason: 'already-pulled' }
    : { ...said, wrapReachedS: (Date.parse(wrapReachedAt) - onAt) / 1000 }
}
