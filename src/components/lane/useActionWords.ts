import { useI18n } from 'vue-i18n'
import { useFormat } from '@/composables/useFormat.ts'
import type { NextAction } from '@/shared/domain/next-actions.ts'
import { usePitWords } from './usePitWords.ts'

/** One thing to do, in words. */
export interface ActionWords {
  /** The clock, or "now". */
  time: string
  /** What and to whom: "Wrap N1". */
  what: string
  /** The interval of a forecast, since when it has been due, or how a pit stands. */
  detail: string
  place: string
}

export function useActionWords(): (action: NextAction, now: number) => ActionWords {
  const { t } = useI18n()
  const format = useFormat()
  const pitWords = usePitWords()

  function detail(action: NextAction, now: number): string {
    if (action.pit !== null) return pitWords.state(action.pit, now) ?? ''
    if (action.early !== null && action.late !== null) return format.interval(action.early, action.late)
    return action.dueNow ? t('wall.since', { time: format.clock(action.at) }) : t('wall.usually')
  }

  return (action, now) => ({
    time: action.dueNow ? t('wall.now') : format.clock(action.at),
    what: t(`wall.action.${action.kind}`, { subject: action.subject }),
    detail: detail(action, now),
    place: action.place ?? '',
  })
}
