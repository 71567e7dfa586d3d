import { shallowRef, watch, type ShallowRef } from 'vue'
import type { LaneData } from '@/components/chart/lane-data.ts'
import type { LiveSite } from '@/stores/live-types.ts'
import { nightOf, type Night } from './night.ts'

/** Lines creep by less than a pixel in this time; what happens is drawn at once all the same. */
const linesEveryMs = 5000

export interface LiveNight {
  /** Null until the first snapshot. Replaced once a second at most. */
  night: Readonly<ShallowRef<Night | null>>
  /** What each cooker's lane draws, by cooker: replaced when something happened, else every five seconds. */
  drawn: Readonly<ShallowRef<ReadonlyMap<number, LaneData>>>
}

/** A site's night as the wall shows it, kept up to date while the component is there. */
export function useNight(live: LiveSite): LiveNight {
  const night = shallowRef<Night | null>(null)
  const drawn = shallowRef<ReadonlyMap<number, LaneData>>(new Map())
  let drawnAt = -Infinity
  let drawnFrom: readonly unknown[] = []

  watch(
    [live.now, () => live.tonight.value === null, () => live.traces.value.size],
    () => {
      const tonight = live.tonight.value
      if (tonight === null) return
      const now = live.now.value
      const current = nightOf({
        tonight,
        now,
        traces: live.traces.value,
        freshnessOf: (channelId) => live.freshnessOf(channelId),
      })
      night.value = current
      const { cookers, pieces, forecasts, events, services } = tonight
      const from = [cookers, pieces, forecasts, events, services, live.traces.value.size]
      const happened = from.some((part, i) => part !== drawnFrom[i])
      if (!happened && now - drawnAt < linesEveryMs) return
      drawnAt = now
      drawnFrom = from
      drawn.value = new Map(current.lanes.map((lane) => [lane.cooker.id, lane.data]))
    },
    { immediate: true },
  )
  return { night, drawn }
}
