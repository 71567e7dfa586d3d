import { useI18n } from 'vue-i18n'
import { useFormat } from '@/composables/useFormat.ts'
import type { PitState, Urgency } from '@/shared/domain/pit-state.ts'

/** A pit's state in words and with its urgency. */
export interface PitWords {
  /** The figure that stands large; a dash where it is not known. */
  figure(pit: PitState): string
  /** The word beside it; null when all is as it should be. */
  state(pit: PitState, now: number): string | null
  urgency(pit: PitState): Urgency | undefined
}

export function usePitWords(): PitWords {
  const { t } = useI18n()
  const format = useFormat()
  return {
    figure: (pit) => (pit.kind === 'silent' || pit.kind === 'no-probe' ? '–' : format.temperature(pit.c)),
    state: (pit, now) => {
      switch (pit.kind) {
        case 'in-band':
          return null
        case 'idle':
          return t('wall.pit.idle')
        case 'no-probe':
          return t('wall.pit.noProbe')
        case 'silent':
          return pit.lastAt === null
            ? t('wall.pit.neverHeard')
            : t('wall.pit.silent', { span: format.duration(now - pit.lastAt) })
        case 'below':
        case 'above': {
          const by = format.temperatureDifference(pit.byC).replace('+', '')
          return t(`wall.pit.${pit.kind}`, { by })
        }
      }
    },
    urgency: (pit) => {
      if (pit.kind === 'below' || pit.kind === 'above') return pit.urgency
      return pit.kind === 'silent' ? 'soon' : undefined
    },
  }
}
