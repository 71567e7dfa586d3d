import { computed, reactive, ref, shallowRef, toRaw, type ComputedRef, type Ref } from 'vue'
import { useI18n } from 'vue-i18n'
import type { z } from 'zod'
import { ApiProblem } from '@/api/api-problem.ts'
import { fieldOf, issueWords } from './issue-words.ts'
import { useFormat } from './useFormat.ts'
import { useProblemWords } from './useProblemWords.ts'

export interface FormOptions<Values extends Record<string, unknown>, Sent extends z.ZodType> {
  /** The fields as they stand when the form opens, and after `reset`. */
  initial: () => Values
  /** What is sent, built from the fields; an empty field is `undefined` or null. */
  toInput: (values: Values) => unknown
  schema: Sent
  submit: (parsed: z.output<Sent>, values: Values) => Promise<void>
}

export interface Form<Values extends Record<string, unknown>> {
  values: Values
  /** What is wrong with a field, in words; shown once the form was sent or the field was left. */
  errorOf(field: string): string | undefined
  /** Call when a field is left. */
  leave(field: string): void
  /** Why the whole form could not be sent. */
  failure: Readonly<Ref<string | null>>
  busy: Readonly<Ref<boolean>>
  pristine: ComputedRef<boolean>
  /** Checks and sends. Never throws: what went wrong stands in `failure` and beside the fields. */
  submit(): Promise<boolean>
  reset(): void
}

/** The one form: fields, what is wrong with each, whether anything was changed, and sending. */
export function useForm<Values extends Record<string, unknown>, Sent extends z.ZodType>(
  options: FormOptions<Values, Sent>,
): Form<Values> {
  const { t } = useI18n()
  const problemWords = useProblemWords()
  const format = useFormat()
  // A copy typed as the fields themselves: reactive() would unwrap refs that a form never holds.
  const values = reactive(options.initial()) as Values
  const start = shallowRef(JSON.stringify(options.initial()))
  const left = ref(new Set<string>())
  const sent = ref(false)
  const busy = ref(false)
  const failure = ref<string | null>(null)
  const refused = ref<Record<string, string>>({})

  const checked = computed(() => options.schema.safeParse(options.toInput({ ...toRaw(values), ...values })))
  const found = computed(() => {
    const errors: Record<string, string> = {}
    for (const issue of checked.value.error?.issues ?? [])
      errors[fieldOf(issue)] ??= issueWords(issue, t, format)
    return errors
  })

  async function submit(): Promise<boolean> {
    if (busy.value) return false
    sent.value = true
    refused.value = {}
    failure.value = null
    if (!checked.value.success) return false
    busy.value = true
    try {
      await options.submit(checked.value.data, { ...values })
      start.value = JSON.stringify(values)
      return true
    } catch (error) {
      failure.value = problemWords(error)
      if (error instanceof ApiProblem) {
        refused.value = Object.fromEntries(
          error.fields.map(({ at, message }) => [at.split('.').at(-1) ?? at, message]),
        )
      }
      return false
    } finally {
      busy.value = false
    }
  }

  function reset(): void {
    Object.assign(values, options.initial())
    start.value = JSON.stringify(values)
    left.value.clear()
    sent.value = false
    refused.value = {}
    failure.value = null
  }

  return {
    values,
    errorOf: (field) =>
      refused.value[field] ?? (sent.value || left.value.has(field) ? found.value[field] : undefined),
    leave: (field) => left.value.add(field),
    failure,
    busy,
    pristine: computed(() => JSON.stringify(values) === start.value),
    submit,
    reset,
  }
}
