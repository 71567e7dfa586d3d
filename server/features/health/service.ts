import type { Knex } from 'knex'
import { z } from 'zod'
import type { Health } from '#shared/contract/health.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { tooLate, within } from '../../http/within.ts'

/** What the parts of the server say about themselves, asked anew each time. */
export interface HealthSources {
  broker(): Health['broker']
  ingest(): Health['ingest']
  live(): Health['live']
  /** What runs without a request, as the database knows it. */
  work(): Promise<Pick<Health, 'forecast' | 'jobs'>>
}

export interface HealthDeps {
  db: Knex
  clock: Clock
  build: string
  sources: HealthSources
}

export type HealthService = ReturnType<typeof createHealthService>

/** How long the database may take to answer before it counts as away, in milliseconds. */
const patienceMs = 2000

const NewestRow = z.object({ newest: z.date().nullable() })

export function createHealthService({ db, clock, build, sources }: HealthDeps) {
  const startedAt = new Date(clock.now()).toISOString()

  /** The newest reading by channel, so that an index answers rather than a scan. */
  const newestReading = async () => {
    const rows: unknown = await db('channels')
      .joinRaw(
        `cross join lateral (
          select last_at from readings_1m where channel_id = channels.id order by minute desc limit 1) newest`,
      )
      .max({ newest: 'newest.last_at' })
    const [row] = z.tuple([NewestRow]).parse(rows)
    return row.newest?.toISOString() ?? null
  }

  return {
    /** Always an answer: a part that fails is told, not thrown. */
    async health(): Promise<Health> {
      const begun = clock.now()
      const [database, work] = await Promise.all([
        within(patienceMs, newestReading(), tooLate).then(
          (newest) => ({ ok: true, detail: `answers in ${clock.now() - begun} ms`, newest }),
          () => ({ ok: false, detail: 'does not answer', newest: null }),
        ),
        sources.work(),
      ])
      const { newest: newestReadingAt, ...part } = database
      const parts = {
        database: part,
        broker: sources.broker(),
        ingest: sources.ingest(),
        live: sources.live(),
        ...work,
      }
      return { ok: Object.values(parts).every(({ ok }) => ok), build, startedAt, ...parts, newestReadingAt }
    },
  }
}
