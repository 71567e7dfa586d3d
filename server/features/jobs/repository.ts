import type { Knex } from 'knex'
import { z } from 'zod'
import { jobKinds, type JobKind } from '#shared/domain/job-schedule.ts'
import { tooLate, within } from '../../http/within.ts'

// The queue's own tables are its package's, and private by name; its version is pinned, and the public view lacks what
// a job is about.
const schema = 'graphile_worker'
const jobs = `${schema}._private_jobs`
const tasks = `${schema}._private_tasks`

/** How much of an error is kept and shown, in characters. */
const errorLength = 300

/** How the runs of one kind went since they were last written down. */
export interface RunsToKeep {
  kind: JobKind
  runs: number
  failed: number
  lastMs: number
  /** First line of the last failure. */
  lastError: string | null
}

/** What the queue holds of one kind. */
const Held = z.object({
  kind: z.enum(jobKinds),
  waiting: z.number(),
  oldestWaitingS: z.number().nullable(),
  running: z.number(),
  failing: z.number(),
})
/** How one kind's runs went. */
const Ran = z.object({
  kind: z.enum(jobKinds),
  lastRunAt: z.date(),
  /** Since then, by the database's clock, in seconds. */
  agoS: z.number(),
  lastRunMs: z.number(),
  runsLastHour: z.number(),
  failedLastHour: z.number(),
})
const Failing = z.object({
  id: z.number(),
  kind: z.enum(jobKinds),
  pieceId: z.number().nullable(),
  label: z.string().nullable(),
  site: z.string().nullable(),
  siteId: z.number().nullable(),
  error: z.string(),
  attempts: z.number(),
  maxAttempts: z.number(),
  failedAt: z.date(),
  nextTryAt: z.date().nullable(),
})
export type HeldJobs = z.infer<typeof Held>
export type RanJobs = z.infer<typeof Ran>
export type FailingRow = z.infer<typeof Failing>

const known = jobKinds.map(() => '?').join()

/** Reads and writes the queue; within a transaction a job is there for others only once it is through. */
export function jobsRepository(db: Knex) {
  const rowsOf = async <T extends z.ZodType>(row: T, sql: string, values: Knex.RawBinding[] = []) =>
    z.object({ rows: z.array(row) }).parse(await db.raw(sql, values)).rows

  return {
    /**
     * Asks for forecasts. One job a piece waits at most; one that waits keeps its place, and one that runs is followed
     * by another, because it may have read the log before it changed.
     */
    async addForecasts(pieceIds: readonly number[], priority: number): Promise<void> {
      if (pieceIds.length === 0) return
      await db.raw(
        `select count(*) from ${schema}.add_jobs((
           select array_agg((
             'forecast', json_build_object('pieceId', id), null, null, 25, 'forecast ' || id, ?::smallint, null
           )::${schema}.job_spec order by id) from unnest(?::int[]) as id), true)`,
        [priority, [...pieceIds]],
      )
    },

    /** Asks for a kind of job in so many seconds; one that waits already is moved there. */
    async add(kind: JobKind, { afterS = 0 }: { afterS?: number } = {}): Promise<void> {
      await db.raw(
        `select from ${schema}.add_job(?, '{}'::json, run_at => now() + make_interval(secs => ?),
           max_attempts => ?, job_key => ?)`,
        [kind, afterS, choreAttempts, kind],
      )
    },

    /** Puts off a forecast whose piece is being forecast by another process. */
    async putOff(pieceId: number, seconds: number): Promise<void> {
      await db.raw(
        `select from ${schema}.add_job('forecast', json_build_object('pieceId', ?::int),
           run_at => now() + make_interval(secs => ?), job_key => 'forecast ' || ?::text)`,
        [pieceId, seconds, pieceId],
      )
    },

    /** Whether an earlier job of the same kind, for the same piece, is still being done somewhere. */
    async isBusy(jobId: string | number, kind: JobKind, pieceId: number | null): Promise<boolean> {
      const found = await rowsOf(
        z.object({}),
        `select from ${jobs} jobs join ${tasks} tasks on tasks.id = jobs.task_id
         where jobs.locked_at is not null and jobs.id < ?::bigint and tasks.identifier = ?
           and jobs.payload->>'pieceId' is not distinct from ?::text limit 1`,
        [jobId, kind, pieceId],
      )
      return found.length > 0
    },

    /**
     * Gives back what is being done by processes that are gone: those whose lock of presence is free. Younger than
     * the grace a process may not have had time to take its lock.
     * @returns how many processes were found dead
     */
    async releaseDead(presenceLock: number, graceS: number): Promise<number> {
      const [row] = await rowsOf(
        z.object({ dead: z.number(), released: z.unknown() }),
        `with worker as materialized (
           select locked_by as id from ${jobs} where locked_by is not null
           group by 1 having max(locked_at) < now() - make_interval(secs => ?)
         ), dead as materialized (
           select id from worker where pg_try_advisory_xact_lock(?, hashtext(id))
         )
         select count(*) as dead, ${schema}.force_unlock_workers(array_agg(id)) as released from dead`,
        [graceS, presenceLock],
      )
      return row?.dead ?? 0
    },

    /** What the queue holds now, by kind. */
    held: (patienceMs: number): Promise<HeldJobs[]> =>
      patiently(
        db,
        patienceMs,
        Held,
        `select tasks.identifier as kind,
           count(*) filter (where due) as waiting,
           max(extract(epoch from now() - run_at)) filter (where due)::float8 as "oldestWaitingS",
           count(*) filter (where locked_at is not null) as running,
           count(*) filter (where ${isFailing}) as failing
         from (select *, locked_at is null and attempts < max_attempts and run_at <= now() as due from ${jobs}) jobs
         join ${tasks} tasks on tasks.id = jobs.task_id
         where tasks.identifier in (${known}) group by 1`,
        [...jobKinds],
      ),

    /** How the runs on record went, by kind. */
    ran: (patienceMs: number): Promise<RanJobs[]> =>
      patiently(
        db,
        patienceMs,
        Ran,
        `select last.kind, last.last_ended_at as "lastRunAt", last.last_ms as "lastRunMs",
           extract(epoch from now() - last.last_ended_at)::float8 as "agoS",
           coalesce(hour.runs, 0)::int as "runsLastHour", coalesce(hour.failed, 0)::int as "failedLastHour"
         from (select distinct on (kind) * from job_runs order by kind, minute desc) last
         left join lateral (
           select sum(runs) as runs, sum(failed) as failed from job_runs
           where kind = last.kind and minute > now() - interval '1 hour') hour on true
         where last.kind in (${known})`,
        [...jobKinds],
      ),

    /** Jobs whose last attempt failed, the newest first. */
    failing: (limit: number): Promise<FailingRow[]> =>
      rowsOf(
        Failing,
        `select jobs.id, tasks.identifier as kind, pieces.id as "pieceId", pieces.label, sites.slug as site,
           sites.id as "siteId", left(split_part(jobs.last_error, E'\\n', 1), ${errorLength}) as error,
           jobs.attempts, jobs.max_attempts as "maxAttempts", ${failedAt} as "failedAt",
           case when jobs.attempts < jobs.max_attempts then jobs.run_at end as "nextTryAt"
         from ${jobs} jobs join ${tasks} tasks on tasks.id = jobs.task_id
         left join pieces on pieces.id = (jobs.payload->>'pieceId')::int
         left join sites on sites.id = pieces.site_id
         where ${isFailing} and tasks.identifier in (${known})
         order by "failedAt" desc limit ?`,
        [...jobKinds, limit],
      ),

    /** Tries a failing job again now. @returns whether it was there */
    async retry(jobId: number): Promise<boolean> {
      const found = await rowsOf(
        z.object({}),
        `update ${jobs} jobs set run_at = now(), attempts = 0, updated_at = now()
         where id = ? and ${isFailing} and locked_at is null returning id`,
        [jobId],
      )
      if (found.length > 0) await db.raw(`select pg_notify('jobs:insert', '{"count":1}')`)
      return found.length > 0
    },

    /** Strikes a failing job. @returns whether it was there */
    async strike(jobId: number): Promise<boolean> {
      const found = await rowsOf(
        z.object({}),
        `delete from ${jobs} jobs where id = ? and ${isFailing} and locked_at is null returning id`,
        [jobId],
      )
      return found.length > 0
    },

    /** Strikes what was given up of a kind: it has gone well since, or is asked for anew. */
    async strikeGivenUp(kind: JobKind, beforeJob: string | number | null = null): Promise<void> {
      await db.raw(
        `delete from ${jobs} jobs using ${tasks} tasks
         where tasks.id = jobs.task_id and tasks.identifier = ? and jobs.attempts >= jobs.max_attempts
           and jobs.locked_at is null and jobs.id < coalesce(?::bigint, jobs.id + 1)`,
        [kind, beforeJob],
      )
    },

    /** Adds to the record of the present minute. */
    async keepRuns(kept: readonly RunsToKeep[]): Promise<void> {
      if (kept.length === 0) return
      await db.raw(
        `insert into job_runs (kind, minute, runs, failed, last_ended_at, last_ms, last_error)
         select kind, date_trunc('minute', now()), runs, failed, now(), "lastMs", "lastError"
         from json_to_recordset(?::json)
           as kept(kind text, runs int, failed int, "lastMs" float8, "lastError" text) order by kind
         on conflict (kind, minute) do update set
           runs = job_runs.runs + excluded.runs, failed = job_runs.failed + excluded.failed,
           last_ended_at = excluded.last_ended_at, last_ms = excluded.last_ms,
           last_error = coalesce(excluded.last_error, job_runs.last_error)`,
        [JSON.stringify(kept.map((one) => ({ ...one, lastError: one.lastError?.slice(0, errorLength) })))],
      )
    },

    /** Forgets runs of earlier days but each kind's last, and jobs that were superseded while they ran and died. */
    async tidy(): Promise<void> {
      await db.raw(
        `delete from job_runs old where minute < now() - interval '1 day'
           and exists (select from job_runs newer where newer.kind = old.kind and newer.minute > old.minute)`,
      )
      await db.raw(
        `delete from ${jobs} where attempts >= max_attempts and locked_at is null
           and (key is null or last_error is null or run_at < now() - interval '7 days')`,
      )
    },
  }
}

/** The queue takes its key from a job that is asked for anew while it runs: what becomes of it then is nobody's concern. */
const isFailing = 'jobs.last_error is not null and jobs.key is not null'

/** The queue notes when a failed job is due again: after exp(attempts) seconds, of at most ten attempts. */
const failedAt = 'least(now(), jobs.run_at - make_interval(secs => exp(least(jobs.attempts, 10))))'

/** A chore that failed so often waits for its next turn. */
const choreAttempts = 5

/** Rows, or an error once they are late: whoever asks how things are gets an answer while the database is away. */
async function patiently<T extends z.ZodType>(
  db: Knex,
  patienceMs: number,
  row: T,
  sql: string,
  values: Knex.RawBinding[],
): Promise<z.output<T>[]> {
  const query = async (): Promise<unknown> => db.raw(sql, values)
  return z.object({ rows: z.array(row) }).parse(await within(patienceMs, query(), tooLate)).rows
}
