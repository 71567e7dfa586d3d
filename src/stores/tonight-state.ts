import type { LiveChanges } from '@/shared/contract/live.ts'
import type { Tonight } from '@/shared/contract/site.ts'
import type { LatestValue, TonightState } from './live-types.ts'

/** The state that a snapshot describes. Events are not in it: they come over HTTP, and by frames from then on. */
export function fromSnapshot(tonight: Tonight): TonightState {
  return {
    site: tonight.site,
    cookers: byId(tonight.cookers),
    pieces: byId(tonight.pieces),
    devices: byId(tonight.devices),
    services: byId(tonight.services),
    forecasts: new Map(tonight.forecasts.map((forecast) => [forecast.pieceId, forecast])),
    latest: new Map(tonight.latest.map(({ channelId, at, c }) => [channelId, { at: Date.parse(at), c }])),
    events: new Map(),
  }
}

/**
 * The state after a frame. Only the maps that the frame touches are new, so that a shallow watch sees just what
 * changed. A value that is older than what is known already is passed over: frames of late readings come too.
 */
export function applyChanges(state: TonightState, changes: LiveChanges): TonightState {
  const next: { -readonly [key in keyof TonightState]: TonightState[key] } = { ...state }
  if (filled(changes.cookers)) next.cookers = including(state.cookers, changes.cookers)
  if (filled(changes.pieces)) {
    next.pieces = including(state.pieces, newest(state.pieces, changes.pieces))
  }
  if (filled(changes.devices)) next.devices = including(state.devices, changes.devices)
  if (filled(changes.services)) next.services = including(state.services, changes.services)
  if (filled(changes.events)) {
    next.events = new Map([...state.events, ...changes.events.map((event) => [event.id, event] as const)])
  }
  if (filled(changes.forecasts)) {
    next.forecasts = new Map([
      ...state.forecasts,
      ...changes.forecasts.map((forecast) => [forecast.pieceId, forecast] as const),
    ])
  }
  if (filled(changes.readings)) {
    const latest = new Map<number, LatestValue>(state.latest)
    for (const [channelId, at, c] of changes.readings) {
      if (at >= (latest.get(channelId)?.at ?? -Infinity)) latest.set(channelId, { at, c })
    }
    next.latest = latest
  }
  return next
}

function filled<T>(list: readonly T[] | undefined): list is readonly T[] {
  return list !== undefined && list.length > 0
}

function byId<T extends { id: number }>(items: readonly T[]): ReadonlyMap<number, T> {
  return new Map(items.map((item) => [item.id, item]))
}

function including<T extends { id: number }>(
  map: ReadonlyMap<number, T>,
  items: readonly T[],
): ReadonlyMap<number, T> {
  return new Map([...map, ...items.map((item) => [item.id, item] as const)])
}

/** An answer over HTTP may overtake the frame of an earlier change: the higher version stands. */
function newest<T extends { id: number; version: number }>(
  known: ReadonlyMap<number, T>,
  items: readonly T[],
): T[] {
  return items.filter((item) => item.version >= (known.get(item.id)?.version ?? 0))
}
