import { computed, type ComputedRef } from 'vue'
import { useI18n } from 'vue-i18n'
import type { LiveSite } from '@/stores/live-types.ts'

/** A channel to choose. A type alias, as the select wants plain records. */
export type ProbeChoice = { value: number; label: string }

/** The site's probes to choose from: free ones first; one in use says where it is. 0 is none. */
export function useProbeChoices(
  live: LiveSite,
  ownChannelId: () => number | null,
): ComputedRef<ProbeChoice[]> {
  const { t } = useI18n()
  return computed(() => {
    const devices = [...(live.tonight.value?.devices.values() ?? [])]
    const channels = devices.flatMap((device) => device.channels.map((channel) => ({ device, channel })))
    const isFree = ({ channel }: (typeof channels)[number]) =>
      channel.placedIn === null || channel.id === ownChannelId()
    return [
      { value: 0, label: t('cook.noProbe') },
      ...channels
        .toSorted((a, b) => Number(isFree(b)) - Number(isFree(a)))
        .map((each) => {
          const probe = t('cook.probeAt', { number: each.channel.number, device: each.device.name })
          const name = each.channel.placedIn?.name ?? ''
          const place = isFree(each) ? t('cook.free') : t('cook.inUse', { name })
          return { value: each.channel.id, label: `${probe} · ${place}` }
        }),
    ]
  })
}
