import type { Knex } from 'knex'
import { z } from 'zod'
import type { Placement } from '#shared/domain/piece-projection.ts'

/** A cooker as far as putting a piece on it goes. */
export interface CookerSpace {
  id: number
  name: string
  capacity: number
  /** How many other pieces stand on it. */
  standing: number
  /** Whether the piece stands on it itself. */
  holdsIt: boolean
}

/** Where pieces stood. */
export function placementsRepository(db: Knex) {
  return {
    /** Puts a piece's stretches on cookers in the place of those known so far. */
    async replace(pieceId: number, placements: readonly Placement[]): Promise<void> {
      await db('placements').where({ piece_id: pieceId }).del()
      if (placements.length === 0) return
      await db('placements').insert(
        placements.map((place) => ({
          piece_id: pieceId,
          cooker_id: place.cookerId,
          position: place.position,
          during: db.raw(`tstzrange(?, ?, '[)')`, [
            new Date(place.from).toISOString(),
            place.to === null ? null : new Date(place.to).toISOString(),
          ]),
        })),
      )
    },

    /**
     * A cooker of the site and who stands on it now beside a piece. Held until the transaction ends, so that two
     * people cannot both take its last place.
     */
    async holdSpace(siteId: number, cookerId: number, pieceId: number): Promise<CookerSpace | undefined> {
      const found: unknown = await db.raw(
        `select id, name, capacity from cookers where id = ? and site_id = ? and retired_at is null for no key update`,
        [cookerId, siteId],
      )
      const [cooker] = CookerRows.parse(found).rows
      if (!cooker) return undefined
      const counted: unknown = await db.raw(
        `select count(*) filter (where piece_id <> :pieceId) as standing,
                count(*) filter (where piece_id = :pieceId) > 0 as holds_it
         from placements where cooker_id = :cookerId and upper_inf(during)`,
        { cookerId, pieceId },
      )
      const [{ standing, holds_it: holdsIt }] = CountRows.parse(counted).rows
      return { ...cooker, standing, holdsIt }
    },

    /** The name of a cooker, retired ones too. */
    async cookerName(cookerId: number): Promise<string | undefined> {
      const row: unknown = await db('cookers').where({ id: cookerId }).first('name')
      return z.object({ name: z.string() }).optional().parse(row)?.name
    },

    /** The pieces that stand on a cooker now. */
    async standingOn(cookerId: number): Promise<number[]> {
      const found: unknown = await db.raw(
        `select piece_id from placements where cooker_id = ? and upper_inf(during)`,
        [cookerId],
      )
      return z
        .object({ rows: z.array(z.object({ piece_id: z.number() })) })
        .parse(found)
        .rows.map((row) => row.piece_id)
    },
  }
}

const CookerRows = z.object({
  rows: z.array(z.object({ id: z.number(), name: z.string(), capacity: z.number() })),
})
const CountRows = z.object({ rows: z.tuple([z.object({ standing: z.number(), holds_it: z.boolean() })]) })
