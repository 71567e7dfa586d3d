import type { ComputedRef, Ref, ShallowRef } from 'vue'
import type { Cooker } from '@/shared/contract/cooker.ts'
import type { Device } from '@/shared/contract/device.ts'
import type { CookEvent } from '@/shared/contract/event.ts'
import type { LatestForecast } from '@/shared/contract/forecast.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { Service, Site } from '@/shared/contract/site.ts'
import type { NextStep } from '@/shared/domain/next-step.ts'

/**
 * `connecting`: the first time, nothing is known yet. `live`: frames come in. `reconnecting`: the line was lost,
 * or could not be opened, and is being opened again; what is shown is the last that was heard. `refused`: the server
 * does not let this person see the site.
 */
export type ConnectionState = 'connecting' | 'live' | 'reconnecting' | 'refused'

/** The newest value of a channel: milliseconds since 1970 UTC and corrected °C. */
export interface LatestValue {
  readonly at: number
  readonly c: number
}

/**
 * A site's running night. Every map and every object in it is replaced, never changed in place, so that a shallow
 * watch sees each change. Cookers are found by id; `cookersInOrder` sorts them for the wall.
 */
export interface TonightState {
  readonly site: Site
  readonly cookers: ReadonlyMap<number, Cooker>
  readonly pieces: ReadonlyMap<number, Piece>
  readonly devices: ReadonlyMap<number, Device>
  readonly services: ReadonlyMap<number, Service>
  /** By piece id. */
  readonly forecasts: ReadonlyMap<number, LatestForecast>
  /** By channel id. */
  readonly latest: ReadonlyMap<number, LatestValue>
  /** By event id: what was logged while we listened, corrections included. History comes over HTTP. */
  readonly events: ReadonlyMap<string, CookEvent>
}

/**
 * A channel's line over the last twelve hours and a little: four arrays of one length in time order. `at` in
 * milliseconds since 1970 UTC; a `c` of null is a gap; `low` and `high` are the extremes of the step.
 */
export interface ChannelTrace {
  readonly channelId: number
  readonly at: readonly number[]
  readonly c: readonly (number | null)[]
  readonly low: readonly (number | null)[]
  readonly high: readonly (number | null)[]
}

/** How fresh a channel is. */
export interface Freshness {
  /** True once the device, or this channel of it, has been silent for three of the device's own intervals. */
  readonly stale: boolean
  /** `never`: no reading at all; `device`: nothing from the whole device; `channel`: only this probe is silent. */
  readonly why: 'fresh' | 'never' | 'device' | 'channel'
  /** Age of the newest reading in milliseconds; null when there is none. */
  readonly ageMs: number | null
}

/** What a page gets from `useLive(site)`. It joins the site's room while the component is mounted. */
export interface LiveSite {
  readonly connection: ComputedRef<ConnectionState>
  /** Null until the first snapshot. */
  readonly tonight: ComputedRef<TonightState | null>
  /** By channel id; empty until loaded. */
  readonly traces: ComputedRef<ReadonlyMap<number, ChannelTrace>>
  /** What is to be done next, for the page's title; also kept while nobody sees the page. */
  readonly next: ComputedRef<NextStep | null>
  /** The server's present in milliseconds since 1970 UTC, moving once a second. */
  readonly now: Readonly<Ref<number>>
  /** How fresh a channel is at `now`; reactive when called in a template or computed. */
  freshnessOf(channelId: number): Freshness
  /** Short for `freshnessOf(channelId).stale`. */
  staleOf(channelId: number): boolean
  /** Puts an answer of the server into the state at once, without waiting for its frame. */
  take(changes: { pieces?: Piece[]; cookers?: Cooker[]; events?: CookEvent[]; services?: Service[] }): void
}

/** The reactive cells behind `LiveSite`, one set a site. */
export interface LiveRoom {
  readonly site: string
  readonly connection: ShallowRef<ConnectionState>
  readonly tonight: ShallowRef<TonightState | null>
  readonly traces: ShallowRef<ReadonlyMap<number, ChannelTrace>>
  readonly next: ShallowRef<NextStep | null>
}
