import { z } from 'zod'
import { Id, Instant, NoBody, Nothing, PathId, SiteParams, pageOf } from './common.ts'
import { atSite, endpoint } from './endpoint.ts'
import { RejectionReason } from './device.ts'
import { SenmlPack } from './senml.ts'

export const Reading = z
  .object({
    at: Instant,
    /** As sent, in the unit the device used. */
    value: z.number(),
    receivedAt: Instant,
    /** Corrected by the sensor's kind and offset. */
    celsius: z.number().nullable(),
  })
  .meta({ id: 'Reading' })
export type Reading = z.infer<typeof Reading>

/**
 * A line of a chart: three arrays of one length. `at` is in milliseconds since 1970 UTC, a `c` of null is a gap.
 * Where several readings fall into one step, `low` and `high` keep its extremes.
 */
export const Trace = z
  .object({
    channelId: Id,
    at: z.array(z.number()),
    c: z.array(z.number().nullable()),
    low: z.array(z.number().nullable()),
    high: z.array(z.number().nullable()),
  })
  .meta({ id: 'Trace' })
export type Trace = z.infer<typeof Trace>

/** What became of a pack sent over HTTP. */
export const IngestOutcome = z
  .object({
    stored: z.int(),
    /** Readings that were there already with the same value. */
    duplicates: z.int(),
    rejected: z.array(z.object({ reason: RejectionReason, detail: z.string() })),
  })
  .meta({ id: 'IngestOutcome' })
export type IngestOutcome = z.infer<typeof IngestOutcome>

const Span = z.object({ from: Instant, to: Instant })
const tag = 'Readings'

export const readingEndpoints = {
  ofChannel: endpoint({
    method: 'get',
    path: '/api/channels/:channelId/readings',
    tag,
    summary: 'Every reading of a channel as sent and corrected, newest first',
    access: atSite('history.view', 'channelId'),
    params: z.object({ channelId: PathId }),
    query: Span.partial().extend({
      cursor: z.string().max(200).optional(),
      limit: z.coerce.number().int().min(1).max(10_000).default(1000),
    }),
    body: NoBody,
    response: pageOf(Reading).extend({ channelId: Id, unit: z.string() }),
    status: 200,
  }),
  traces: endpoint({
    method: 'get',
    path: '/api/sites/:site/traces',
    tag,
    summary: 'Lines for the charts of a site’s pits and pieces over a span, at most `points` a line',
    access: atSite('site.view'),
    params: SiteParams,
    query: Span.extend({
      /** Channel numbers with commas between; all that are placed in the span when absent. */
      channels: z
        .string()
        .regex(/^\d+(,\d+)*$/)
        .optional(),
      points: z.coerce.number().int().min(10).max(1500).default(720),
    }),
    body: NoBody,
    response: z.object({ from: Instant, to: Instant, traces: z.array(Trace) }),
    status: 200,
  }),
  ofPiece: endpoint({
    method: 'get',
    path: '/api/pieces/:pieceId/trace',
    tag,
    summary: 'A piece’s own temperature and that of the pits it stood in, from going on to now or to its end',
    access: atSite('history.view', 'pieceId'),
    params: z.object({ pieceId: PathId }),
    query: z.object({ points: z.coerce.number().int().min(10).max(1500).default(1000) }),
    body: NoBody,
    response: z.object({ core: Trace.nullable(), pit: Trace.nullable() }),
    status: 200,
  }),
  send: endpoint({
    method: 'post',
    path: '/api/readings',
    tag,
    summary: 'A SenML pack of a device without MQTT; answered once it is stored',
    access: { kind: 'device' },
    params: Nothing,
    query: Nothing,
    body: SenmlPack,
    response: IngestOutcome,
    status: 200,
  }),
}
