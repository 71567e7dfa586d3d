import type { Device } from '../shared/contract/device.ts'
import type { Freshness, TonightState } from './live-types.ts'

/** Silence of this many of a device's own intervals makes its data stale. */
const intervalsUntilStale = 3
/** For a channel whose device is not known: the usual five seconds. */
const usualIntervalS = 5

/**
 * How fresh a channel is at `now` (milliseconds since 1970 UTC). Data is judged by when it was measured, not by when
 * it came: a device that sends old readings after an outage is still stale until it has caught up.
 */
export function freshness(
  state: Pick<TonightState, 'devices' | 'latest'>,
  channelId: number,
  now: number,
): Freshness {
  const own = state.latest.get(channelId)
  if (own === undefined) return { stale: true, why: 'never', ageMs: null }
  const device = deviceOf(state.devices, channelId)
  const limitMs = intervalsUntilStale * (device?.intervalS ?? usualIntervalS) * 1000
  const ageMs = Math.max(0, now - own.at)
  if (ageMs <= limitMs) return { stale: false, why: 'fresh', ageMs }
  const heardAt = Math.max(
    own.at,
    ...(device?.channels ?? []).map((channel) => state.latest.get(channel.id)?.at ?? -Infinity),
  )
  return { stale: true, why: now - heardAt > limitMs ? 'device' : 'channel', ageMs }
}

/** Silence that is drawn as a gap in a channel's line, in milliseconds; never less than the lines' own steps. */
export function gapMsOf(devices: TonightState['devices'], channelId: number): number {
  const intervalS = deviceOf(devices, channelId)?.intervalS ?? usualIntervalS
  return Math.max(90_000, intervalsUntilStale * intervalS * 1000)
}

function deviceOf(devices: TonightState['devices'], channelId: number): Device | undefined {
  for (const device of devices.values()) {
    if (device.channels.some((channel) => channel.id === channelId)) return device
  }
  return undefined
}
