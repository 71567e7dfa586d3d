import type { DeviceCredentials } from './device-publisher.ts'
import type { SiteState } from './house-state.ts'

/** When a device's newest reading was taken, by what the API knows; undefined for one that was never heard. */
export function lastHeard(
  states: readonly SiteState[],
): (credentials: DeviceCredentials) => number | undefined {
  return ({ site, device }) => {
    const tonight = states.find((state) => state.tonight.site.slug === site)?.tonight
    const channels = tonight?.devices.find(({ slug }) => slug === device)?.channels ?? []
    const moments = (tonight?.latest ?? []).flatMap(({ channelId, at }) => {
      return channels.some(({ id }) => id === channelId) ? [Date.parse(at)] : []
    })
    return moments.length === 0 ? undefined : Math.max(...moments)
  }
}
