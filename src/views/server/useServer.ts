import { useQuery } from '@tanstack/vue-query'
import { ref } from 'vue'
import { useI18n } from 'vue-i18n'
import { call } from '@/api/client.ts'
import { useProblemWords } from '@/composables/useProblemWords.ts'
import { healthEndpoints } from '@/shared/contract/health.ts'
import { jobEndpoints, type FailingJob, type JobOverview } from '@/shared/contract/job.ts'

const everyMs = 3000

/** How the server is and what it does unasked, fresh every few seconds while the page is shown, and its buttons. */
export function useServer() {
  const { t } = useI18n()
  const wordsOf = useProblemWords()
  const health = useQuery({
    queryKey: ['health'],
    queryFn: () => call(healthEndpoints.health),
    refetchInterval: everyMs,
  })
  const jobs = useQuery({
    queryKey: ['jobs'],
    queryFn: () => call(jobEndpoints.list),
    refetchInterval: everyMs,
  })
  const busy = ref(false)
  /** What the last button did, or why it could not. */
  const told = ref<{ text: string; failed: boolean }>()

  async function ask(asking: Promise<void>, done: string): Promise<void> {
    busy.value = true
    try {
      await asking
      told.value = { text: done, failed: false }
    } catch (error) {
      told.value = { text: wordsOf(error), failed: true }
    }
    busy.value = false
    await Promise.all([jobs.refetch(), health.refetch()])
  }

  const nameOf = ({ kind, piece }: Pick<FailingJob, 'kind' | 'piece'>) =>
    piece === null
      ? t(`server.kind.${kind}`)
      : t('server.failing.of', { kind: t(`server.kind.${kind}`), piece: piece.label })

  return {
    health,
    jobs,
    busy,
    told,
    nameOf,
    run: ({ kind }: JobOverview) =>
      ask(
        call(jobEndpoints.run, { params: { kind } }),
        t('server.jobs.asked', { kind: t(`server.kind.${kind}`) }),
      ),
    retry: (job: FailingJob) =>
      ask(
        call(jobEndpoints.retry, { params: { jobId: job.id } }),
        t('server.failing.retried', { what: nameOf(job) }),
      ),
    giveUp: (job: FailingJob) =>
      ask(
        call(jobEndpoints.giveUp, { params: { jobId: job.id } }),
        t('server.failing.struck', { what: nameOf(job) }),
      ),
  }
}
