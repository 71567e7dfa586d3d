import { computed, shallowRef, watchEffect, type ComputedRef } from 'vue'
import type { LiveSite } from '@/stores/live-types.ts'

/** When the server was last heard while the line to it is down, in milliseconds since 1970 UTC; null while it is up. */
export function useLostSince(live: Pick<LiveSite, 'connection' | 'now'>): ComputedRef<number | null> {
  const heardAt = shallowRef(live.now.value)
  watchEffect(() => {
    if (live.connection.value === 'live') heardAt.value = live.now.value
  })
  return computed(() => (live.connection.value === 'reconnecting' ? heardAt.value : null))
}
