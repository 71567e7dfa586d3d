import type { Knex } from 'knex'
import { z } from 'zod'
import { CookerKindName } from '#shared/contract/cooker.ts'
import { WrapMethodName } from '#shared/contract/event.ts'
import { effectiveEvents } from '#shared/domain/effective-events.ts'
import type { CookerKind, WrapMethod } from '#shared/domain/cooking.ts'
import { asLogged, eventsRepository } from '../events/index.ts'
import type { PitSetHistory, Stretch } from './pit-set-course.ts'

/** A channel that was read over a stretch of time, half open, ms since 1970 UTC; `to` is null while it lasts. */
export interface ChannelStretch {
  channelId: number
  from: number
  to: number | null
}

/** What the database knows of a piece's cook, but the readings themselves. */
export interface CookRecord {
  pieceId: number
  site: string
  recipe: string
  cured: boolean
  rawKg: number
  wrapAtC: number
  wrapMethod: WrapMethod
  pullAtC: number
  onAt: number
  pulledAt: number | null
  /** Set when it goes by a sibling's probe. */
  followsId: number | null
  cookerKind: CookerKind
  /** Where it stood until it was pulled. */
  stretches: Stretch[]
  pitSets: Map<number, PitSetHistory>
  wraps: { at: number; method: WrapMethod }[]
  core: ChannelStretch[]
  pit: ChannelStretch[]
}

/** Reads what the forecast needs of a piece; undefined when there is none, or it is not on a cooker yet. */
export async function cookRecord(db: Knex, pieceId: number): Promise<CookRecord | undefined> {
  const [piece] = PieceRows.parse(
    await db.raw(
      `select p.id, s.slug as site, r.slug as recipe, p.cured, p.raw_kg, p.wrap_at_c, p.wrap_method, p.pull_at_c,
              p.on_at, p.pulled_at, p.follows_id
       from pieces p join sites s on s.id = p.site_id join recipes r on r.id = p.recipe_id
       where p.id = ? and p.on_at is not null`,
      [pieceId],
    ),
  ).rows
  if (!piece) return undefined
  const [places, core, pit, events] = await Promise.all([
    placesOf(db, pieceId),
    coreChannels(db, pieceId),
    pitChannels(db, pieceId),
    eventsRepository(db).ofPiece(pieceId),
  ])
  const pulledAt = piece.pulled_at?.getTime() ?? null
  const onFire = places.filter((place) => pulledAt === null || place.from < pulledAt)
  const [first] = onFire
  if (!first) return undefined
  return {
    pieceId,
    site: piece.site,
    recipe: piece.recipe,
    cured: piece.cured,
    rawKg: piece.raw_kg,
    wrapAtC: piece.wrap_at_c,
    wrapMethod: piece.wrap_method,
    pullAtC: piece.pull_at_c,
    onAt: piece.on_at.getTime(),
    pulledAt,
    followsId: piece.follows_id,
    cookerKind: first.kind,
    stretches: onFire.map(({ cookerId, from, to }) => ({ cookerId, from, to })),
    pitSets: await pitSetHistories(db, onFire),
    wraps: effectiveEvents(events.map(asLogged)).flatMap(({ happenedAt, fact }) =>
      fact.kind === 'wrap' ? { at: happenedAt, method: fact.method } : [],
    ),
    core,
    pit,
  }
}

/** The pieces of every site that are on a fire now, and those pulled since anything was last said of them. */
export async function piecesToForecast(db: Knex): Promise<number[]> {
  const answer: unknown = await db.raw(
    `select id from pieces p where stage <> 'done' and on_at is not null and (
       pulled_at is null
       or not exists (select 1 from forecasts where piece_id = p.id and made_at >= p.pulled_at)
     ) order by id`,
  )
  return IdRows.parse(answer).rows.map((row) => row.id)
}

/** Finished pieces that had a probe of their own, oldest first. */
export async function finishedPieces(db: Knex): Promise<number[]> {
  const answer: unknown = await db.raw(
    `select id from pieces p where pulled_at is not null
       and exists (select 1 from probe_placements where piece_id = p.id) order by pulled_at`,
  )
  return IdRows.parse(answer).rows.map((row) => row.id)
}

type Place = Stretch & { kind: CookerKind; setNowC: number }

async function placesOf(db: Knex, pieceId: number): Promise<Place[]> {
  const answer: unknown = await db.raw(
    `select pl.cooker_id, lower(pl.during) as since, upper(pl.during) as until, c.kind, c.pit_set_c
     from placements pl join cookers c on c.id = pl.cooker_id where pl.piece_id = ? order by lower(pl.during)`,
    [pieceId],
  )
  return PlaceRows.parse(answer).rows.map((row) => ({
    cookerId: row.cooker_id,
    from: row.since.getTime(),
    to: row.until?.getTime() ?? null,
    kind: row.kind,
    setNowC: row.pit_set_c,
  }))
}

async function pitSetHistories(db: Knex, places: readonly Place[]): Promise<Map<number, PitSetHistory>> {
  const changes = await eventsRepository(db).pitSetChanges(places.map((place) => place.cookerId))
  return new Map(
    places.map(({ cookerId, setNowC }) => [
      cookerId,
      { setNowC, changes: changes.filter((change) => change.cookerId === cookerId) },
    ]),
  )
}

async function coreChannels(db: Knex, pieceId: number): Promise<ChannelStretch[]> {
  const answer: unknown = await db.raw(
    `select channel_id, lower(during) as since, upper(during) as until
     from probe_placements where piece_id = ? order by lower(during)`,
    [pieceId],
  )
  return ChannelRows.parse(answer).rows.map(stretchOf)
}

/** The pit probes of the cookers where the piece stood, each while it stood there. */
async function pitChannels(db: Knex, pieceId: number): Promise<ChannelStretch[]> {
  const answer: unknown = await db.raw(
    `select pp.channel_id, lower(pp.during * pl.during) as since, upper(pp.during * pl.during) as until
     from placements pl join probe_placements pp on pp.cooker_id = pl.cooker_id and pp.during && pl.during
     where pl.piece_id = ? order by 2`,
    [pieceId],
  )
  return ChannelRows.parse(answer).rows.map(stretchOf)
}

function stretchOf(row: z.infer<typeof ChannelRow>): ChannelStretch {
  return { channelId: row.channel_id, from: row.since.getTime(), to: row.until?.getTime() ?? null }
}

const IdRows = z.object({ rows: z.array(z.object({ id: z.number() })) })
const PieceRows = z.object({
  rows: z.array(
    z.object({
      id: z.number(),
      site: z.string(),
      recipe: z.string(),
      cured: z.boolean(),
      raw_kg: z.number(),
      wrap_at_c: z.number(),
      wrap_method: WrapMethodName,
      pull_at_c: z.number(),
      on_at: z.date(),
      pulled_at: z.date().nullable(),
      follows_id: z.number().nullable(),
    }),
  ),
})
const PlaceRows = z.object({
  rows: z.array(
    z.object({
      cooker_id: z.number(),
      since: z.date(),
      until: z.date().nullable(),
      kind: CookerKindName,
      pit_set_c: z.number(),
    }),
  ),
})
const ChannelRow = z.object({ channel_id: z.number(), since: z.date(), until: z.date().nullable() })
const ChannelRows = z.object({ rows: z.array(ChannelRow) })
