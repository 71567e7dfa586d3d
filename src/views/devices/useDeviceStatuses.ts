import { useQuery } from '@tanstack/vue-query'
import { computed, type ComputedRef } from 'vue'
import { call } from '@/api/client.ts'
import { useSite } from '@/composables/useSite.ts'
import { deviceEndpoints, type DeviceStatus } from '@/shared/contract/device.ts'

/** How often the counts are fetched, in ms; that a device came or went is told by the live socket. */
const everyMs = 10_000

/** How each device of the page's site is connected, by device id; empty for those who may not see it. */
export function useDeviceStatuses(): ComputedRef<ReadonlyMap<number, DeviceStatus>> {
  const site = useSite()
  const list = useQuery({
    queryKey: ['device-status', site.slug],
    queryFn: () => call(deviceEndpoints.statuses, { params: { site: site.slug.value } }),
    enabled: () => site.may('device.view'),
    refetchInterval: everyMs,
  })
  return computed(() => new Map(list.data.value?.items.map((status) => [status.deviceId, status]) ?? []))
}
