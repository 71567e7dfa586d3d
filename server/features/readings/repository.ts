import type { Knex } from 'knex'
import { z } from 'zod'
import { numberArray } from '../../db/number-array.ts'
import type { LinePart } from './cuts.ts'

/** A reading as it was sent; moments in milliseconds since 1970 UTC. */
export interface StoredReading {
  atMs: number
  value: number
  receivedAtMs: number
}

/** Where a piece's own temperature and that of its pits come from. */
export interface PieceLines {
  core: LinePart[]
  pit: LinePart[]
}

const ReadingRow = z.object({ at: z.date(), value: z.number(), received_at: z.date() })
const LatestRow = z.object({ channel_id: z.int(), at: z.date(), value: z.number() })
const PieceRow = z.object({ on_at: z.date().nullable(), done_at: z.date().nullable() })
const PartRow = z.object({
  role: z.enum(['core', 'pit']),
  channel_id: z.int(),
  from_ms: z.number(),
  to_ms: z.number(),
})
const Ids = z.array(z.object({ id: z.int() }))

/** Readings, and which of them belong to what. */
export function readingRepository(db: Knex) {
  return {
    /** A page of a channel's readings from the newest back: at or after `fromMs`, before `beforeMs`. */
    async ofChannel(
      channelId: number,
      page: { fromMs: number | undefined; beforeMs: number | undefined; limit: number },
    ): Promise<StoredReading[]> {
      const query = db('readings')
        .where({ channel_id: channelId })
        .select('at', 'value', 'received_at')
        .orderBy('at', 'desc')
        .limit(page.limit)
      if (page.fromMs !== undefined) void query.where('at', '>=', new Date(page.fromMs))
      if (page.beforeMs !== undefined) void query.where('at', '<', new Date(page.beforeMs))
      const rows: unknown = await query
      return z
        .array(ReadingRow)
        .parse(rows)
        .map((row) => ({ atMs: row.at.getTime(), value: row.value, receivedAtMs: row.received_at.getTime() }))
    },

    /** Each channel's newest reading since a moment; channel by channel, which reads one row of each. */
    async latest(
      channelIds: readonly number[],
      sinceMs: number,
    ): Promise<{ channelId: number; atMs: number; value: number }[]> {
      const found: unknown = await db.raw(
        `select c.channel_id, r.at, r.value
         from unnest(:channels::int[]) as c (channel_id)
         cross join lateral (
           select at, value from readings
           where channel_id = c.channel_id and at >= :since::timestamptz
           order by at desc limit 1
         ) as r
         order by 1`,
        { channels: numberArray(channelIds), since: new Date(sinceMs).toISOString() },
      )
      return z
        .object({ rows: z.array(LatestRow) })
        .parse(found)
        .rows.map((row) => ({ channelId: row.channel_id, atMs: row.at.getTime(), value: row.value }))
    },

    /** Those of the channels that belong to a site. */
    async channelsOfSite(siteId: number, among: readonly number[]): Promise<number[]> {
      const rows: unknown = await db('channels as c')
        .join('devices as d', 'd.id', 'c.device_id')
        .where('d.site_id', siteId)
        .whereIn('c.id', among)
        .orderBy('c.id')
        .select('c.id')
      return Ids.parse(rows).map(({ id }) => id)
    },

    /** The channels of a site whose probe was in a piece or a pit during a span. */
    async channelsPlaced(siteId: number, fromMs: number, toMs: number): Promise<number[]> {
      const rows: unknown = await db('channels as c')
        .join('devices as d', 'd.id', 'c.device_id')
        .where('d.site_id', siteId)
        .whereExists(
          db('probe_placements as pp')
            .whereRaw('pp.channel_id = c.id')
            .whereRaw('pp.during && tstzrange(?, ?)', [new Date(fromMs), new Date(toMs)]),
        )
        .orderBy('c.id')
        .select('c.id')
      return Ids.parse(rows).map(({ id }) => id)
    },

    /** The probes in a piece, and those of the pits while it stood there; undefined before it went on. */
    async partsOfPiece(pieceId: number, nowMs: number): Promise<PieceLines | undefined> {
      const row: unknown = await db('pieces').where({ id: pieceId }).first('on_at', 'done_at')
      const piece = PieceRow.optional().parse(row)
      if (!piece?.on_at) return undefined
      const until = piece.done_at ?? new Date(nowMs)
      const found: unknown = await db.raw(
        `with night as (select tstzrange(:from::timestamptz, :until::timestamptz, '[]') as span),
         parts as (
           select 'core' as role, channel_id, during * night.span as span
           from probe_placements, night where piece_id = :pieceId
           union all
           select 'pit', pit.channel_id, pit.during * stood.during * night.span
           from placements stood
           join probe_placements pit on pit.cooker_id = stood.cooker_id and pit.role = 'pit'
           cross join night
           where stood.piece_id = :pieceId
         )
         select role, channel_id, extract(epoch from lower(span))::float8 * 1000 as from_ms,
           extract(epoch from upper(span))::float8 * 1000 as to_ms
         from parts where not isempty(span)`,
        { pieceId, from: piece.on_at.toISOString(), until: until.toISOString() },
      )
      const parts = z.object({ rows: z.array(PartRow) }).parse(found).rows
      const ofRole = (role: 'core' | 'pit') =>
        parts
          .filter((part) => part.role === role)
          .map((part) => ({ channelId: part.channel_id, fromMs: part.from_ms, toMs: part.to_ms }))
      return { core: ofRole('core'), pit: ofRole('pit') }
    },
  }
}
