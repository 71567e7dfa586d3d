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
    forecast: Part.extend({ pieces: z.int(), lastRunMs: z.number().nullable() }),
    newestReadingAt: Instant.nullable(),
  })
  .meta({ id: 'Health' })
export type Health = z.infer<typeof Health>

export const healthEndpoints = {
  health: endpoint({
    method: 'get',
    path: '/api/health',
    tag: 'Health',
    summary: 'Whether database, broker, ingest and forecast work, and how fresh the newest reading is',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: Health,
    status: 200,
  }),
}
