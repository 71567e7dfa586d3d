import { jobEndpoints } from '#shared/contract/job.ts'
import type { Mount } from '../../http/mount.ts'
import type { JobsService } from './service.ts'

export function jobRoutes(mount: Mount, { jobs }: { jobs: JobsService }): void {
  mount(jobEndpoints.list, ({ person }) => jobs.list(person))
  mount(jobEndpoints.run, async ({ params }): Promise<undefined> => {
    await jobs.run(params.kind)
  })
  mount(jobEndpoints.retry, async ({ params }): Promise<undefined> => {
    await jobs.retry(params.jobId)
  })
  mount(jobEndpoints.giveUp, async ({ params }): Promise<undefined> => {
    await jobs.giveUp(params.jobId)
  })
}
