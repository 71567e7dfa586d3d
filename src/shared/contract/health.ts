import { z } from 'zod'
import { Instant, NoBody, Nothing } from './common.ts'
import { endpoint } from './endpoint.ts'

const Part = z.object({ ok: z.boolean(), detail: z.string() })

export const Health = z
  .object({
    ok: z.boolean(),
    build: z.string(),
    startedAt: Instant,
    database: Part,
    broker: Part.extend({ clients: z.int() }),
    ingest: Part.extend({
      /** Readings waiting for the database. */
      waiting: z.int(),
      /** Receipt to commit, over the last minute, in milliseconds; null when nothing came. */
      delayMedianMs: z.number().nullable(),
      delayP99Ms: z.number().nullable(),
    }),
    live: Part.extend({ connections: z.int() }),
    /** `pieces` that are being forecast, and how long the last one took, in milliseconds. */
    forecast: Part.extend({ pieces: z.int(), lastRunMs: z.number().nullable() }),
    /** What runs without a request, in the whole house. */
    jobs: Part.extend({
      /** Jobs that are due and wait for a free hand. */
      waiting: z.int(),
      /** How long the first of them has waited, in seconds: the queue's delay. */
      oldestWaitingS: z.number().nullable(),
      /** Jobs whose last attempt failed. */
      failing: z.int(),
      /** Attempts that failed in the last hour. */
      failedLastHour: z.int(),
    }),
    newestReadingAt: Instant.nullable(),
  })
  .meta({ id: 'Health' })
export type Health = z.infer<typeof Health>

export const healthEndpoints = {
  health: endpoint({
    method: 'get',
    path: '/api/health',
    tag: 'Health',
    summary:
      'Whether database, broker, ingest, live pages, forecasts and jobs work, and how fresh the newest reading is; 503 when readings cannot be stored',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: Health,
    status: 200,
    unwellStatus: 503,
  }),
}
