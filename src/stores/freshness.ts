import type { Freshness, TonightState } from './live-types.ts'

/** A channel is stale once it has been silent for this many of its device's own intervals. */
const silentIntervals = 3

/**
 * How fresh a channel is.
 * @param nowMs the server's present, in milliseconds since 1970 UTC
 */
export function freshnessOf(state: TonightState | null, channelId: number, nowMs: number): Freshness {
  const newest = state?.latest.get(channelId)
  if (!state || newest === undefined) return { stale: true, why: 'never', ageMs: null }
  const ageMs = Math.max(0, nowMs - newest.at)
  const device = [...state.devices.values()].find(({ channels }) =>
    channels.some(({ id }) => id === channelId),
  )
  const boundMs = (device?.intervalS ?? 5) * silentIntervals * 1000
  if (ageMs <= boundMs) return { stale: false, why: 'fresh', ageMs }
  const siblings = device?.channels ?? []
  const otherSpeaks = siblings.some(({ id }) => {
    const at = state.latest.get(id)?.at
    return id !== channelId && at !== undefined && nowMs - at <= boundMs
  })
  return { stale: true, why: otherSpeaks ? 'channel' : 'device', ageMs }
}
