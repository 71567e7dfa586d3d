import { useQuery, useQueryClient } from '@tanstack/vue-query'
import { ref, shallowRef } from 'vue'
import { call } from '@/api/client.ts'
import { useForm } from '@/composables/useForm.ts'
import { useProblemWords } from '@/composables/useProblemWords.ts'
import { deviceEndpoints, secretOverlapHours, type NewDeviceSecret } from '@/shared/contract/device.ts'

/** While the list is looked at, in ms: the device may come with its new secret at any time. */
const everyMs = 5_000

/** A device's secrets: which are good, the making of a new one in steps, and the end of an old one. */
export function useDeviceSecrets(deviceId: number) {
  const problemWords = useProblemWords()
  const queries = useQueryClient()
  const queryKey = ['device-secrets', deviceId]
  const step = ref<'list' | 'choose' | 'made'>('list')
  const made = shallowRef<NewDeviceSecret | null>(null)
  const ending = ref(false)
  const failure = ref<string | null>(null)

  const list = useQuery({
    queryKey,
    queryFn: () => call(deviceEndpoints.secrets, { params: { deviceId } }),
    refetchInterval: everyMs,
  })
  const form = useForm({
    initial: (): { overlapHours: number } => ({ overlapHours: secretOverlapHours.usual }),
    toInput: (values) => values,
    schema: deviceEndpoints.renewSecret.body,
    submit: async (body) => {
      made.value = await call(deviceEndpoints.renewSecret, { params: { deviceId }, body })
      step.value = 'made'
      await queries.invalidateQueries({ queryKey })
    },
  })

  async function end(secretId: number): Promise<void> {
    ending.value = true
    failure.value = null
    try {
      await call(deviceEndpoints.endSecret, { params: { deviceId, secretId } })
    } catch (error) {
      failure.value = problemWords(error)
    }
    ending.value = false
    await queries.invalidateQueries({ queryKey })
  }

  return { list, form, made, step, ending, failure, end }
}
