import type { Knex } from 'knex'
import { z } from 'zod'
import { WrapMethodName } from '#shared/contract/event.ts'
import { PieceStage, type Piece, type PieceChange } from '#shared/contract/piece.ts'
import type { PieceProjection } from '#shared/domain/piece-projection.ts'
import type { WrapMethod } from '#shared/domain/cooking.ts'
import { askForForecasts } from '../jobs/service.ts'

/** A piece about to be made. Temperatures in °C, mass in kg, moments in ms since 1970 UTC. */
export interface PieceToStore {
  siteId: number
  label: string
  serviceId: number | null
  recipeId: number
  cured: boolean
  rawKg: number
  wrapAtC: number
  wrapMethod: WrapMethod
  pullAtC: number
  createdAt: number
}

export type WhichPieces = 'open' | 'done' | 'all'

export function piecesRepository(db: Knex) {
  return {
    async find(pieceId: number): Promise<Piece | undefined> {
      const [piece] = await select(db, 'p.id = ?', [pieceId])
      return piece
    },

    /** The same, held against every other change until the transaction ends. */
    async hold(pieceId: number): Promise<Piece | undefined> {
      await db.raw('select 1 from pieces where id = ? for no key update', [pieceId])
      return this.find(pieceId)
    },

    findAll: (pieceIds: readonly number[]): Promise<Piece[]> => select(db, 'p.id = any(?)', [[...pieceIds]]),

    open: (siteId: number): Promise<Piece[]> =>
      select(db, `p.site_id = ? and p.stage <> 'done'`, [siteId], 'order by p.id'),

    /** At most `limit` pieces with numbers below `beforeId`, newest first. */
    page(siteId: number, which: WhichPieces, beforeId: number, limit: number): Promise<Piece[]> {
      const stage = { open: `and p.stage <> 'done'`, done: `and p.stage = 'done'`, all: '' }[which]
      return select(
        db,
        `p.site_id = ? and p.id < ? ${stage}`,
        [siteId, beforeId],
        'order by p.id desc limit ?',
        [limit],
      )
    },

    async add(piece: PieceToStore): Promise<number> {
      const [row] = Ids.parse(
        await db('pieces')
          .insert({
            site_id: piece.siteId,
            label: piece.label,
            service_id: piece.serviceId,
            recipe_id: piece.recipeId,
            cured: piece.cured,
            raw_kg: piece.rawKg,
            wrap_at_c: piece.wrapAtC,
            wrap_method: piece.wrapMethod,
            pull_at_c: piece.pullAtC,
            created_at: new Date(piece.createdAt),
          })
          .returning('id'),
      )
      return row.id
    },

    /** Makes a change and counts the version up. */
    async change(pieceId: number, change: PieceChange): Promise<void> {
      const columns = {
        label: change.label,
        raw_kg: change.rawKg,
        wrap_at_c: change.wrapAtC,
        wrap_method: change.wrapMethod,
        pull_at_c: change.pullAtC,
        service_id: change.serviceId,
        follows_id: change.followsId,
      }
      // Knex leaves out what is undefined.
      await db('pieces')
        .where({ id: pieceId })
        .update({ ...columns, version: db.raw('version + 1') })
    },

    /** Keeps what its events say of it, and counts the version up. */
    async saveProjection(pieceId: number, projection: PieceProjection): Promise<void> {
      await db('pieces')
        .where({ id: pieceId })
        .update({
          stage: projection.stage,
          on_at: date(projection.onAt),
          wrapped_at: date(projection.wrappedAt),
          wrapped_with: projection.wrappedWith,
          pulled_at: date(projection.pulledAt),
          rest_at: date(projection.restAt),
          hold_at: date(projection.holdAt),
          done_at: date(projection.doneAt),
          trimmed_kg: projection.trimmedKg,
          cooked_kg: projection.cookedKg,
          sliced_kg: projection.slicedKg,
          version: db.raw('version + 1'),
        })
    },

    /** Counts the version up for a change beside the row itself: its probe. */
    async touch(pieceId: number): Promise<void> {
      await db('pieces')
        .where({ id: pieceId })
        .update({ version: db.raw('version + 1') })
    },

    /** Asks for new forecasts, to be made in whatever process once the transaction is through. */
    async announce(pieceIds: readonly number[]): Promise<void> {
      await askForForecasts(db, pieceIds)
    },

    async isServiceOf(siteId: number, serviceId: number): Promise<boolean> {
      const found: unknown = await db('services').where({ id: serviceId, site_id: siteId }).first('id')
      return found !== undefined
    },
  }
}

const Ids = z.tuple([z.object({ id: z.number() })])

const PieceRows = z.object({
  rows: z.array(
    z.object({
      id: z.number(),
      version: z.number(),
      site: z.string(),
      label: z.string(),
      parent_id: z.number().nullable(),
      follows_id: z.number().nullable(),
      service_id: z.number().nullable(),
      recipe_id: z.number(),
      recipe_slug: z.string(),
      recipe_name: z.string(),
      cured: z.boolean(),
      raw_kg: z.number(),
      trimmed_kg: z.number().nullable(),
      cooked_kg: z.number().nullable(),
      sliced_kg: z.number().nullable(),
      wrap_at_c: z.number(),
      wrap_method: WrapMethodName,
      pull_at_c: z.number(),
      stage: PieceStage,
      cooker_id: z.number().nullable(),
      cooked_on_id: z.number().nullable(),
      position: z.string().nullable(),
      channel_id: z.number().nullable(),
      on_at: z.date().nullable(),
      wrapped_at: z.date().nullable(),
      wrapped_with: WrapMethodName.nullable(),
      pulled_at: z.date().nullable(),
      rest_at: z.date().nullable(),
      hold_at: z.date().nullable(),
      done_at: z.date().nullable(),
    }),
  ),
})

type Bindings = readonly (string | number | number[])[]

async function select(db: Knex, where: string, bindings: Bindings, rest = '', more: Bindings = []) {
  const answer: unknown = await db.raw(
    `select p.*, s.slug as site, r.slug as recipe_slug, r.name as recipe_name,
            place.cooker_id, place.position, fire.cooker_id as cooked_on_id, probe.channel_id
     from pieces p
     join sites s on s.id = p.site_id
     join recipes r on r.id = p.recipe_id
     left join lateral (
       select cooker_id, position from placements where piece_id = p.id order by lower(during) desc limit 1
     ) place on true
     left join lateral (
       select cooker_id from placements
       where piece_id = p.id and lower(during) < coalesce(p.pulled_at, 'infinity')
       order by lower(during) desc limit 1
     ) fire on true
     left join lateral (
       select channel_id from probe_placements where piece_id = p.id and upper_inf(during)
       order by lower(during) desc limit 1
     ) probe on true
     where ${where} ${rest}`,
    [...bindings, ...more],
  )
  return PieceRows.parse(answer).rows.map((row): Piece => ({
    id: row.id,
    version: row.version,
    site: row.site,
    label: row.label,
    parentId: row.parent_id,
    followsId: row.follows_id,
    serviceId: row.service_id,
    recipe: { id: row.recipe_id, slug: row.recipe_slug, name: row.recipe_name },
    cured: row.cured,
    rawKg: row.raw_kg,
    trimmedKg: row.trimmed_kg,
    cookedKg: row.cooked_kg,
    slicedKg: row.sliced_kg,
    wrapAtC: row.wrap_at_c,
    wrapMethod: row.wrap_method,
    pullAtC: row.pull_at_c,
    stage: row.stage,
    cookerId: row.cooker_id,
    cookedOnId: row.cooked_on_id,
    position: row.position,
    channelId: row.channel_id,
    onAt: instant(row.on_at),
    wrappedAt: instant(row.wrapped_at),
    wrappedWith: row.wrapped_with,
    pulledAt: instant(row.pulled_at),
    restAt: instant(row.rest_at),
    holdAt: instant(row.hold_at),
    doneAt: instant(row.done_at),
  }))
}

function instant(date: Date | null): string | null {
  return date === null ? null : date.toISOString()
}

function date(ms: number | null): Date | null {
  return ms === null ? null : new Date(ms)
}
