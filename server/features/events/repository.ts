import type { Knex } from 'knex'
import { z } from 'zod'
import { EventFact, type CookEvent } from '#shared/contract/event.ts'
import type { LoggedEvent } from '#shared/domain/piece-projection.ts'

/** An event about to be stored. Moments in ms since 1970 UTC. */
export interface EventToStore {
  id: string
  siteId: number
  subject: { pieceId: number } | { cookerId: number }
  happenedAt: number
  recordedAt: number
  /** Null for what the house's own machinery logged. */
  userId: number | null
  fact: EventFact
  note: string | null
  correctsId: string | null
  /** For a change of the pit's set: what it was before, °C. */
  pitSetBeforeC?: number | null
}

/** A change of a pit's set as logged, with what it was before. */
export type PitSetChange = LoggedEvent & { pitSetBeforeC: number | null }

export type EventsRepository = ReturnType<typeof eventsRepository>

/** The log: only ever added to. */
export function eventsRepository(db: Knex) {
  return {
    async find(id: string): Promise<CookEvent | undefined> {
      const [event] = await select(db, 'e.id = ?', [id])
      return event
    },

    /** Everything logged on a piece, oldest first. */
    ofPiece: (pieceId: number): Promise<CookEvent[]> => select(db, 'e.piece_id = ?', [pieceId]),

    /** Several pieces' events in one query, each piece's oldest first. */
    ofPieces: (pieceIds: readonly number[]): Promise<CookEvent[]> =>
      select(db, 'e.piece_id = any(?)', [[...pieceIds]]),

    ofCooker: (cookerId: number): Promise<CookEvent[]> => select(db, 'e.cooker_id = ?', [cookerId]),

    /** Every change of these pits' sets, corrections and withdrawals included. */
    async pitSetChanges(cookerIds: readonly number[]): Promise<(PitSetChange & { cookerId: number })[]> {
      const answer: unknown = await db.raw(
        `select id, corrects_id, happened_at, recorded_at, fact, pit_set_before_c, cooker_id
         from events where cooker_id = any(?) and kind in ('pit_set', 'withdrawn') order by happened_at`,
        [[...cookerIds]],
      )
      return PitSetRows.parse(answer).rows.map((row) => ({
        id: row.id,
        correctsId: row.corrects_id,
        happenedAt: row.happened_at.getTime(),
        recordedAt: row.recorded_at.getTime(),
        fact: row.fact,
        pitSetBeforeC: row.pit_set_before_c,
        cookerId: row.cooker_id,
      }))
    },

    async add(events: readonly EventToStore[]): Promise<void> {
      for (let start = 0; start < events.length; start += 500) {
        await db('events').insert(events.slice(start, start + 500).map(rowOf))
      }
    },

    /** Two that send the same event at once go one after the other: held until the transaction ends. */
    async lockId(id: string): Promise<void> {
      await db.raw('select pg_advisory_xact_lock(hashtextextended(?, 0))', [id])
    },
  }
}

/** What the projection of a piece needs of an event. */
export function asLogged(event: CookEvent): LoggedEvent {
  return {
    id: event.id,
    correctsId: event.correctsId,
    happenedAt: Date.parse(event.happenedAt),
    recordedAt: Date.parse(event.recordedAt),
    fact: event.fact,
  }
}

const EventRows = z.object({
  rows: z.array(
    z.object({
      id: z.string(),
      piece_id: z.number().nullable(),
      cooker_id: z.number().nullable(),
      happened_at: z.date(),
      recorded_at: z.date(),
      user_id: z.number().nullable(),
      user_name: z.string().nullable(),
      fact: EventFact,
      note: z.string().nullable(),
      corrects_id: z.string().nullable(),
      corrected_by_id: z.string().nullable(),
    }),
  ),
})

const PitSetRows = z.object({
  rows: z.array(
    z.object({
      id: z.string(),
      corrects_id: z.string().nullable(),
      happened_at: z.date(),
      recorded_at: z.date(),
      fact: EventFact,
      pit_set_before_c: z.number().nullable(),
      cooker_id: z.number(),
    }),
  ),
})

async function select(
  db: Knex,
  where: string,
  bindings: readonly (string | number | number[])[],
): Promise<CookEvent[]> {
  const answer: unknown = await db.raw(
    `select e.id, e.piece_id, e.cooker_id, e.happened_at, e.recorded_at, e.user_id, u.name as user_name,
            e.fact, e.note, e.corrects_id, later.id as corrected_by_id
     from events e
     left join users u on u.id = e.user_id
     left join events later on later.corrects_id = e.id
     where ${where}
     order by e.happened_at, e.recorded_at, e.id`,
    bindings,
  )
  return EventRows.parse(answer).rows.map((row) => ({
    id: row.id,
    pieceId: row.piece_id,
    cookerId: row.cooker_id,
    happenedAt: row.happened_at.toISOString(),
    recordedAt: row.recorded_at.toISOString(),
    by: row.user_id !== null && row.user_name !== null ? { id: row.user_id, name: row.user_name } : null,
    fact: row.fact,
    note: row.note,
    correctsId: row.corrects_id,
    correctedById: row.corrected_by_id,
  }))
}

function rowOf(event: EventToStore) {
  return {
    id: event.id,
    site_id: event.siteId,
    piece_id: 'pieceId' in event.subject ? event.subject.pieceId : null,
    cooker_id: 'cookerId' in event.subject ? event.subject.cookerId : null,
    kind: event.fact.kind,
    fact: JSON.stringify(event.fact),
    note: event.note,
    happened_at: new Date(event.happenedAt),
    recorded_at: new Date(event.recordedAt),
    user_id: event.userId,
    corrects_id: event.correctsId,
    pit_set_before_c: event.pitSetBeforeC ?? null,
  }
}
