import { z } from 'zod'
import { jobKinds } from '../domain/job-schedule.ts'
import { Id, Instant, NoBody, Nothing } from './common.ts'
import { atAnySite, endpoint } from './endpoint.ts'

/** A kind of work that is done without a request, and how it goes in the whole house. */
export const JobOverview = z
  .object({
    kind: z.enum(jobKinds),
    /** When its last run ended; null when none is on record. */
    lastRunAt: Instant.nullable(),
    /** How long that run took, in milliseconds. */
    lastRunMs: z.number().nullable(),
    /** Its next turn; null for what is asked for by others. */
    nextRunAt: Instant.nullable(),
    /** Jobs that are due and wait for a free hand, and for how long the first of them has, in seconds. */
    waiting: z.int(),
    oldestWaitingS: z.number().nullable(),
    running: z.int(),
    /** Jobs whose last attempt failed. */
    failing: z.int(),
    runsLastHour: z.int(),
    failedLastHour: z.int(),
  })
  .meta({ id: 'JobOverview' })
export type JobOverview = z.infer<typeof JobOverview>

/** A job whose last attempt failed. */
export const FailingJob = z
  .object({
    id: z.int().positive(),
    kind: z.enum(jobKinds),
    /** The piece that it is about, where it is about one at a site of yours. */
    piece: z.object({ id: Id, label: z.string(), site: z.string() }).nullable(),
    /** The first line of what went wrong. */
    error: z.string(),
    attempts: z.int(),
    maxAttempts: z.int(),
    failedAt: Instant,
    /** When it is tried again; null when it was given up. */
    nextTryAt: Instant.nullable(),
  })
  .meta({ id: 'FailingJob' })
export type FailingJob = z.infer<typeof FailingJob>

const JobId = z.object({ jobId: z.coerce.number().int().positive().max(Number.MAX_SAFE_INTEGER) })
const access = atAnySite('server.manage')

export const jobEndpoints = {
  list: endpoint({
    method: 'get',
    path: '/api/jobs',
    tag: 'Jobs',
    summary: 'What the server does without being asked, and what of it fails; the newest 50 failures',
    access,
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: z.object({ kinds: z.array(JobOverview), failing: z.array(FailingJob) }),
    status: 200,
  }),
  run: endpoint({
    method: 'post',
    path: '/api/jobs/:kind/run',
    tag: 'Jobs',
    summary: 'Run a kind of job now; for `forecast`, forecast every piece',
    access,
    params: z.object({ kind: z.enum(jobKinds) }),
    query: Nothing,
    body: NoBody,
    response: NoBody,
    status: 204,
  }),
  retry: endpoint({
    method: 'post',
    path: '/api/jobs/failing/:jobId/retry',
    tag: 'Jobs',
    summary: 'Try a failing job again now, also one that was given up',
    access,
    params: JobId,
    query: Nothing,
    body: NoBody,
    response: NoBody,
    status: 204,
  }),
  giveUp: endpoint({
    method: 'delete',
    path: '/api/jobs/failing/:jobId',
    tag: 'Jobs',
    summary: 'Give up a failing job and strike it from the list; its kind goes on with its next turn',
    access,
    params: JobId,
    query: Nothing,
    body: NoBody,
    response: NoBody,
    status: 204,
  }),
}
