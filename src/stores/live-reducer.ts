import type { LiveChanges, ServerMessage } from '../shared/contract/live.ts'
import type { Tonight } from '../shared/contract/site.ts'
import type { LatestValue, TonightState } from './live-types.ts'

/** How many live events are remembered: more than a night of a large site logs. */
const eventsKept = 1000

/** The running night as a snapshot tells it; events heard before are kept, they are never taken back. */
export function tonightFrom(snapshot: Tonight, before?: TonightState | null): TonightState {
  return {
    site: snapshot.site,
    cookers: byId(snapshot.cookers),
    pieces: byId(snapshot.pieces),
    devices: byId(snapshot.devices),
    services: byId(snapshot.services),
    forecasts: new Map(snapshot.forecasts.map((forecast) => [forecast.pieceId, forecast])),
    latest: new Map(snapshot.latest.map(({ channelId, at, c }) => [channelId, { at: Date.parse(at), c }])),
    events: before?.events ?? new Map(),
  }
}

/** The night with a frame's changes in it. Nothing in `state` is touched; parts without a change are kept as they are. */
export function applyChanges(state: TonightState, changes: LiveChanges): TonightState {
  return {
    site: state.site,
    cookers: replaced(state.cookers, changes.cookers, (cooker) => cooker.id),
    pieces: replaced(state.pieces, changes.pieces, (piece) => piece.id),
    devices: replaced(state.devices, changes.devices, (device) => device.id),
    services: replaced(state.services, changes.services, (service) => service.id),
    forecasts: replaced(state.forecasts, changes.forecasts, (forecast) => forecast.pieceId),
    latest: newest(state.latest, changes.readings),
    events: capped(withCorrections(replaced(state.events, changes.events, (event) => event.id))),
  }
}

/** Where a client stands in a room's frames. */
export interface Place {
  epoch: string
  seq: number
}

/**
 * What to do with a delta: apply it when it is the next one, ignore it when it is an old one, ask for a snapshot
 * when one was missed or the server process is another.
 */
export function sequence(
  place: Place | null,
  delta: Extract<ServerMessage, { type: 'delta' }>,
): 'apply' | 'ignore' | 'missed' {
  if (place?.epoch !== delta.epoch) return 'missed'
  if (delta.seq <= place.seq) return 'ignore'
  return delta.seq === place.seq + 1 ? 'apply' : 'missed'
}

function byId<T extends { id: number }>(items: readonly T[]): Map<number, T> {
  return new Map(items.map((item) => [item.id, item]))
}

function replaced<K, T>(
  map: ReadonlyMap<K, T>,
  items: readonly T[] | undefined,
  keyOf: (item: T) => K,
): ReadonlyMap<K, T> {
  if (items === undefined || items.length === 0) return map
  const next = new Map(map)
  for (const item of items) next.set(keyOf(item), item)
  return next
}

function newest(
  latest: TonightState['latest'],
  readings: LiveChanges['readings'],
): ReadonlyMap<number, LatestValue> {
  // A device that catches up after an outage sends old readings: they belong to the line, not to "now".
  const newer = (readings ?? []).filter(([channelId, at]) => at >= (latest.get(channelId)?.at ?? -Infinity))
  if (newer.length === 0) return latest
  const next = new Map(latest)
  for (const [channelId, at, c] of newer) {
    if (at >= (next.get(channelId)?.at ?? -Infinity)) next.set(channelId, { at, c })
  }
  return next
}

/** A correction marks the event it corrects, whether or not the server sent that one again. */
function withCorrections(events: TonightState['events']): TonightState['events'] {
  let next: Map<string, NonNullable<ReturnType<typeof events.get>>> | undefined
  for (const event of events.values()) {
    if (event.correctsId === null) continue
    const corrected = events.get(event.correctsId)
    if (corrected === undefined || corrected.correctedById !== null) continue
    next ??= new Map(events)
    next.set(corrected.id, { ...corrected, correctedById: event.id })
  }
  return next ?? events
}

function capped(events: TonightState['events']): TonightState['events'] {
  if (events.size <= eventsKept) return events
  return new Map([...events].slice(events.size - eventsKept))
}
