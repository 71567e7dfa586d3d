import { useI18n } from 'vue-i18n'
import { ApiProblem } from '@/api/api-problem.ts'

/** Puts whatever a call threw into a sentence for the person. The server's own sentence wins where there is one. */
export function useProblemWords(): (error: unknown) => string {
  const { t, locale } = useI18n()
  return (error) => {
    if (!(error instanceof ApiProblem)) return t('errors.unknown')
    const own = t(`errors.${error.kind}`)
    // The server speaks English; elsewhere its sentence stands behind ours.
    const said = error.message === error.kind ? '' : error.message
    const told =
      error.kind !== 'offline' && error.kind !== 'server' && error.kind !== 'unreadable' && said !== ''
    if (!told) return own
    return locale.value === 'en' ? said : `${own} (${said})`
  }
}
