import { useI18n } from 'vue-i18n'
import { useFormat } from '@/composables/useFormat.ts'
import type { EventFact } from '@/shared/contract/event.ts'

/** An event's fact in words: "Wrapped in paper", "Moved to Holding Cabinet". */
export function useEventWords(cookerName: (id: number) => string): (fact: EventFact) => string {
  const { t } = useI18n()
  const format = useFormat()
  return (fact) => {
    switch (fact.kind) {
      case 'on':
        return t('cook.fact.on', { cooker: cookerName(fact.cookerId) })
      case 'wrap':
        return t('cook.fact.wrap', { method: t(`words.wrapMethod.${fact.method}`) })
      case 'pull':
        return t(`cook.fact.pull.${fact.by}`)
      case 'moved':
        return t('cook.fact.moved', { cooker: cookerName(fact.toCookerId) })
      case 'hold':
        return fact.cookerId === undefined
          ? t('cook.fact.hold')
          : t('cook.fact.holdIn', { cooker: cookerName(fact.cookerId) })
      case 'weighed':
        return t('cook.fact.weighed', {
          stage: t(`cook.weighedAs.${fact.stage}`),
          mass: format.mass(fact.kg),
        })
      case 'pit_set':
        return t('cook.fact.pit_set', { temperature: format.temperature(fact.pitSetC) })
      default:
        return t(`cook.fact.${fact.kind}`)
    }
  }
}
