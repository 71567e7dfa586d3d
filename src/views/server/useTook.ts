import { useI18n } from 'vue-i18n'
import { useFormat } from '@/composables/useFormat.ts'

/** Short spans in words, from ms: `12 ms`, `1.4 s`, `95 s`. */
export function useTook(): (ms: number) => string {
  const { t } = useI18n()
  const format = useFormat()
  return (ms) => {
    if (ms < 1000) return t('server.ms', { n: format.number(ms, ms < 10 ? 1 : 0) })
    return t('server.s', { n: format.number(ms / 1000, ms < 10_000 ? 1 : 0) })
  }
}
