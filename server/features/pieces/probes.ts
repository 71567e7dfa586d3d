import type { Knex } from 'knex'
import { z } from 'zod'
import type { PieceProjection } from '#shared/domain/piece-projection.ts'

/** Where a channel's probe was last, and whether it still is. Moments in ms since 1970 UTC. */
export interface ProbePlace {
  id: number
  from: number
  /** Null while it is there. */
  to: number | null
  piece: { id: number; label: string; pulledAt: number | null; done: boolean } | null
  cooker: { id: number; name: string } | null
}

/** Which probe was in which piece when. */
export function probesRepository(db: Knex) {
  return {
    /** Whether the channel is the site's; held until the transaction ends, so that one probe goes one way at a time. */
    async hold(siteId: number, channelId: number): Promise<boolean> {
      const found: unknown = await db.raw(
        `select c.id from channels c join devices d on d.id = c.device_id
         where c.id = ? and d.site_id = ? for no key update of c`,
        [channelId, siteId],
      )
      return z.object({ rows: z.array(z.unknown()) }).parse(found).rows.length > 0
    },

    /** The channel's latest place; undefined when it has never been anywhere. */
    async lastOf(channelId: number): Promise<ProbePlace | undefined> {
      const found: unknown = await db.raw(
        `select pp.id, lower(pp.during) as since, upper(pp.during) as until,
                p.id as piece_id, p.label, p.pulled_at, p.stage = 'done' as done, c.id as cooker_id, c.name
         from probe_placements pp
         left join pieces p on p.id = pp.piece_id
         left join cookers c on c.id = pp.cooker_id
         where pp.channel_id = ? order by lower(pp.during) desc limit 1`,
        [channelId],
      )
      const [row] = PlaceRows.parse(found).rows
      if (!row) return undefined
      return {
        id: row.id,
        from: row.since.getTime(),
        to: row.until?.getTime() ?? null,
        piece:
          row.piece_id !== null && row.label !== null
            ? {
                id: row.piece_id,
                label: row.label,
                pulledAt: row.pulled_at?.getTime() ?? null,
                done: row.done === true,
              }
            : null,
        cooker: row.cooker_id !== null && row.name !== null ? { id: row.cooker_id, name: row.name } : null,
      }
    },

    /** Ends a place; one that would end before it began is removed: the probe was never there. */
    async end(placeId: number, at: number): Promise<void> {
      const moment = new Date(at).toISOString()
      await db.raw(`delete from probe_placements where id = :placeId and lower(during) >= :moment`, {
        placeId,
        moment,
      })
      await db.raw(
        `update probe_placements set during = tstzrange(lower(during), :moment, '[)') where id = :placeId`,
        { placeId, moment },
      )
    },

    /** Ends every place that is still open in a piece. */
    async endIn(pieceId: number, at: number): Promise<void> {
      const open: unknown = await db.raw(
        `select id from probe_placements where piece_id = ? and upper_inf(during)`,
        [pieceId],
      )
      for (const { id } of PlaceIds.parse(open).rows) await this.end(id, at)
    },

    /** Puts a free probe into a piece, no earlier than it came out of what it was in before. */
    async begin(channelId: number, pieceId: number, from: number): Promise<void> {
      await db.raw(
        `insert into probe_placements (channel_id, role, piece_id, during)
         select :channelId, 'meat', :pieceId, tstzrange(greatest(:from::timestamptz, max(upper(during))), null, '[)')
         from probe_placements where channel_id = :channelId`,
        { channelId, pieceId, from: new Date(from).toISOString() },
      )
    },

    /** Lets a piece's probes follow when its going-on or its slicing is moved, logged or taken back. */
    async follow(
      pieceId: number,
      before: Pick<PieceProjection, 'onAt' | 'doneAt'>,
      after: Pick<PieceProjection, 'onAt' | 'doneAt'>,
    ): Promise<void> {
      if (before.onAt !== null && before.onAt !== after.onAt)
        await moveStart(db, pieceId, before.onAt, after.onAt)
      if (before.doneAt !== null && before.doneAt !== after.doneAt) {
        await moveEnd(db, pieceId, before.doneAt, after.doneAt)
      }
      if (after.doneAt !== null) await this.endIn(pieceId, after.doneAt)
    },
  }
}

/** A probe that went in as the piece went on goes in with it at its new time, but not before it was free. */
async function moveStart(db: Knex, pieceId: number, from: number, to: number | null): Promise<void> {
  const then = new Date(from).toISOString()
  if (to === null) {
    await db.raw(`delete from probe_placements where piece_id = ? and lower(during) = ?`, [pieceId, then])
    return
  }
  const moment = new Date(to).toISOString()
  await db.raw(
    `delete from probe_placements
     where piece_id = :pieceId and lower(during) = :then and upper(during) <= :moment::timestamptz`,
    { pieceId, then, moment },
  )
  await db.raw(
    `update probe_placements mine
     set during = tstzrange(
       greatest(:moment::timestamptz, (
         select max(upper(earlier.during)) from probe_placements earlier
         where earlier.channel_id = mine.channel_id and earlier.id <> mine.id
           and upper(earlier.during) <= lower(mine.during))),
       upper(mine.during), '[)')
     where mine.piece_id = :pieceId and lower(mine.during) = :then`,
    { pieceId, then, moment },
  )
}

/** A probe that came out with the slicing stays in until the new time, or as long as it was in nothing else. */
async function moveEnd(db: Knex, pieceId: number, from: number, to: number | null): Promise<void> {
  const then = new Date(from).toISOString()
  const moment = to === null ? null : new Date(to).toISOString()
  await db.raw(
    `delete from probe_placements
     where piece_id = :pieceId and upper(during) = :then and lower(during) >= :moment::timestamptz`,
    { pieceId, then, moment },
  )
  await db.raw(
    `update probe_placements mine
     set during = tstzrange(lower(mine.during), nullif(
       least(coalesce(:moment::timestamptz, 'infinity'), (
         select coalesce(min(lower(later.during)), 'infinity') from probe_placements later
         where later.channel_id = mine.channel_id and later.id <> mine.id
           and lower(later.during) >= upper(mine.during))),
       'infinity'), '[)')
     where mine.piece_id = :pieceId and upper(mine.during) = :then`,
    { pieceId, then, moment },
  )
}

const PlaceRows = z.object({
  rows: z.array(
    z.object({
      id: z.number(),
      since: z.date(),
      until: z.date().nullable(),
      piece_id: z.number().nullable(),
      label: z.string().nullable(),
      pulled_at: z.date().nullable(),
      done: z.boolean().nullable(),
      cooker_id: z.number().nullable(),
      name: z.string().nullable(),
    }),
  ),
})
const PlaceIds = z.object({ rows: z.array(z.object({ id: z.number() })) })
