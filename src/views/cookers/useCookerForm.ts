import { call } from '@/api/client.ts'
import { useForm } from '@/composables/useForm.ts'
import { cookerEndpoints, NewCooker, type Cooker } from '@/shared/contract/cooker.ts'
import { useSite } from '@/composables/useSite.ts'
import type { CookerKind } from '@/shared/domain/cooking.ts'
import type { LiveSite } from '@/stores/live-types.ts'

interface CookerFields extends Record<string, unknown> {
  name: string
  kind: CookerKind
  capacity: number | null
  pitSetC: number | null
  bandLowC: number | null
  bandHighC: number | null
  /** 0 for none. */
  channelId: number
}

const blank: CookerFields = {
  name: '',
  kind: 'offset',
  capacity: 8,
  // 250 °F, and 15 °F either way: where most start.
  pitSetC: 121.1,
  bandLowC: 112.8,
  bandHighC: 129.4,
  channelId: 0,
}

/** The form of a cooker: sends the cooker itself, then where its pit probe hangs when that changed. */
export function useCookerForm(cooker: Cooker | null, live: LiveSite, onSaved: (saved: Cooker) => void) {
  const site = useSite()
  // What is stored by now: when only the probe could not be placed, trying again must not add a second cooker.
  let stored = cooker

  return useForm({
    initial: (): CookerFields => (cooker ? { ...cooker, channelId: cooker.pitChannelId ?? 0 } : { ...blank }),
    toInput: ({ name, kind, capacity, pitSetC, bandLowC, bandHighC }) => ({
      ...{ name, kind, capacity, pitSetC, bandLowC, bandHighC },
    }),
    schema: NewCooker,
    submit: async (fields, { channelId }) => {
      let saved = stored
        ? await call(cookerEndpoints.change, {
            params: { cookerId: stored.id },
            body: fields,
            ifMatch: stored.version,
          })
        : await call(cookerEndpoints.add, { params: { site: site.slug.value }, body: fields })
      stored = saved
      live.take({ cookers: [saved] })
      if (channelId !== (saved.pitChannelId ?? 0)) {
        saved = await call(cookerEndpoints.placeProbe, {
          params: { cookerId: saved.id },
          body: { channelId: channelId === 0 ? null : channelId },
        })
        stored = saved
        live.take({ cookers: [saved] })
      }
      onSaved(saved)
    },
  })
}
