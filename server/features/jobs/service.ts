import type { Knex } from 'knex'
import type { Health } from '#shared/contract/health.ts'
import type { FailingJob, JobOverview } from '#shared/contract/job.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { jobKinds, jobTurns, nextTurn, type JobKind } from '#shared/domain/job-schedule.ts'
import type { Person } from '../../http/mount.ts'
import { notFound } from '../../http/problem.ts'
import { tooLate, within } from '../../http/within.ts'
import { jobsRepository, type HeldJobs, type RanJobs } from './repository.ts'

export { jobsRepository, type RunsToKeep } from './repository.ts'

export interface JobsServiceDeps {
  db: Knex
  /** Real time: turns come by the machine's clock. */
  clock: Clock
  /** The pieces that are to be forecast, by number. */
  toForecast: () => Promise<number[]>
}

export type JobsService = ReturnType<typeof createJobsService>

/** A due job that waits longer than this is late, s. */
const lateS = 60
/** Rounds come each minute; none in so long is late, s. */
const roundLateS = 180
/** How long the database may take to answer before nothing is known, ms. */
const patienceMs = 2000
const mostFailing = 50

/** What is due at once goes before what comes each minute. */
const atOnce = -10

/**
 * Asks for forecasts of pieces that changed, within the transaction that changes them: whichever process has a free
 * hand makes them once it is through.
 */
export function askForForecasts(trx: Knex, pieceIds: readonly number[]): Promise<void> {
  return jobsRepository(trx).addForecasts(pieceIds, atOnce)
}

/** What runs without a request, in whatever process: how it goes, and doing it now. */
export function createJobsService({ db, clock, toForecast }: JobsServiceDeps) {
  const repository = jobsRepository(db)

  return {
    async list({ rolesBySite }: Pick<Person, 'rolesBySite'>): Promise<{
      kinds: JobOverview[]
      failing: FailingJob[]
    }> {
      const [held, ran, failing] = await Promise.all([
        repository.held(patienceMs),
        repository.ran(patienceMs),
        repository.failing(mostFailing),
      ])
      return {
        kinds: jobKinds.map((kind) => overview(kind, held, ran)),
        failing: failing.map(({ pieceId, label, site, siteId, failedAt, nextTryAt, ...job }) => {
          const isShown = pieceId !== null && siteId !== null && rolesBySite.has(siteId)
          return {
            ...job,
            piece: isShown && label !== null && site !== null ? { id: pieceId, label, site } : null,
            failedAt: failedAt.toISOString(),
            nextTryAt: nextTryAt?.toISOString() ?? null,
          }
        }),
      }
    },

    /** Asks for a kind of job now; single forecasts are asked for by a round. */
    async run(kind: JobKind): Promise<void> {
      await repository.add(kind === 'forecast' ? 'forecast-round' : kind)
    },

    /** @throws HttpProblem 404 when the job no longer fails */
    async retry(jobId: number): Promise<void> {
      if (!(await repository.retry(jobId))) throw notFound('That job no longer fails.')
    },

    /** @throws HttpProblem 404 when the job no longer fails */
    async giveUp(jobId: number): Promise<void> {
      if (!(await repository.strike(jobId))) throw notFound('That job no longer fails.')
    },

    /** How forecasts and jobs go in the whole house. Always an answer. */
    async health(): Promise<Pick<Health, 'forecast' | 'jobs'>> {
      try {
        const [held, ran, pieces] = await Promise.all([
          repository.held(patienceMs),
          repository.ran(patienceMs),
          within(patienceMs, toForecast(), tooLate),
        ])
        return { forecast: forecastHealth(held, ran, pieces.length), jobs: jobsHealth(held, ran) }
      } catch {
        const unknown = { ok: false, detail: 'not known: the database does not answer' }
        return {
          forecast: { ...unknown, pieces: 0, lastRunMs: null },
          jobs: { ...unknown, waiting: 0, oldestWaitingS: null, failing: 0, failedLastHour: 0 },
        }
      }
    },
  }

  function overview(kind: JobKind, held: readonly HeldJobs[], ran: readonly RanJobs[]): JobOverview {
    const now = held.find((one) => one.kind === kind)
    const past = ran.find((one) => one.kind === kind)
    const turns = jobTurns[kind]
    return {
      kind,
      lastRunAt: past?.lastRunAt.toISOString() ?? null,
      lastRunMs: past?.lastRunMs ?? null,
      nextRunAt: turns && new Date(nextTurn(turns, clock.now())).toISOString(),
      waiting: now?.waiting ?? 0,
      oldestWaitingS: now?.oldestWaitingS ?? null,
      running: now?.running ?? 0,
      failing: now?.failing ?? 0,
      runsLastHour: past?.runsLastHour ?? 0,
      failedLastHour: past?.failedLastHour ?? 0,
    }
  }
}

function forecastHealth(
  held: readonly HeldJobs[],
  ran: readonly RanJobs[],
  pieces: number,
): Health['forecast'] {
  const round = ran.find(({ kind }) => kind === 'forecast-round')
  const failing = held.find(({ kind }) => kind === 'forecast')?.failing ?? 0
  const isLate = round !== undefined && round.agoS > roundLateS
  const detail = !round
    ? 'the first round is under way'
    : isLate
      ? 'the round of forecasts is late'
      : failing > 0
        ? `${failing} of ${pieces} could not be forecast`
        : `${pieces} ${pieces === 1 ? 'piece' : 'pieces'} forecast`
  const lastRunMs = ran.find(({ kind }) => kind === 'forecast')?.lastRunMs ?? null
  return { ok: !isLate && failing === 0, detail, pieces, lastRunMs }
}

function jobsHealth(held: readonly HeldJobs[], ran: readonly RanJobs[]): Health['jobs'] {
  const sum = (numbers: readonly number[]) => numbers.reduce((total, number) => total + number, 0)
  const waiting = sum(held.map((one) => one.waiting))
  const failing = sum(held.map((one) => one.failing))
  const waits = held.flatMap(({ oldestWaitingS }) => (oldestWaitingS === null ? [] : [oldestWaitingS]))
  const oldestWaitingS = waits.length > 0 ? Math.max(...waits) : null
  const isLate = oldestWaitingS !== null && oldestWaitingS > lateS
  const detail = isLate
    ? `late: the first in line has waited for ${Math.round(oldestWaitingS)} s`
    : failing > 0
      ? `${failing} could not be done and ${failing === 1 ? 'is' : 'are'} tried again or given up`
      : 'all done in time'
  const failedLastHour = sum(ran.map((one) => one.failedLastHour))
  return { ok: !isLate && failing === 0, detail, waiting, oldestWaitingS, failing, failedLastHour }
}
