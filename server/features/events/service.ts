import type { Knex } from 'knex'
import type { Cooker } from '#shared/contract/cooker.ts'
import { cookerEventKinds, type CookEvent, type NewEvent } from '#shared/contract/event.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { conflict, notFound, unprocessable } from '../../http/problem.ts'
import { announcePiecesOn, applyEvents, holdPiece, type By, type PiecesService } from '../pieces/service.ts'
import { correctedBy } from './correction.ts'
import { notInFuture } from './not-in-future.ts'
import { applyPitSet, pitSetOf } from './pit-set.ts'
import { asLogged, eventsRepository, type EventToStore } from './repository.ts'
import { isSameFact } from './same-fact.ts'

export interface EventsDeps {
  db: Knex
  clock: Clock
  pieces: Pick<PiecesService, 'tell'>
  cookers: { listOfSite: (siteId: number) => Promise<Cooker[]> }
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
}

export type EventsService = ReturnType<typeof createEventsService>

/** What the crew logs. Nothing is ever changed or removed: a correction is another entry. */
export function createEventsService({ db, clock, pieces, cookers, publish }: EventsDeps) {
  return {
    ofPiece: (pieceId: number): Promise<CookEvent[]> => eventsRepository(db).ofPiece(pieceId),

    /**
     * Logs an event on a piece, corrects or takes back one. The same event sent twice is logged once.
     * @throws HttpProblem 409 when the id is known with other content, the entry is corrected already or the cooker is
     *   full; 422 when it contradicts what is logged, names something of another site, or is still to come
     */
    async logOnPiece(by: By, pieceId: number, event: NewEvent): Promise<CookEvent> {
      if (isOfCooker(event)) throw unprocessable('That is logged on a cooker, not on a piece.')
      const happenedAt = notInFuture(event.happenedAt, clock, 'happenedAt')
      const logged = await db.transaction(async (trx) => {
        const events = eventsRepository(trx)
        await events.lockId(event.id)
        const known = await events.find(event.id)
        if (known) return { event: sameEvent(known, event, { pieceId }), isNew: false }
        const piece = await holdPiece(trx, pieceId)
        if (!piece) throw notFound()
        const log = await events.ofPiece(pieceId)
        correctedBy(event, log)
        const row = toStore(by, event, happenedAt, { pieceId })
        await events.add([row])
        await applyEvents(trx, by.site.id, piece, [...log.map(asLogged), row], { news: row })
        return { event: await stored(trx, event.id), isNew: true }
      })
      if (logged.isNew) await pieces.tell(by.site.slug, [pieceId], await withCorrected(logged.event))
      return logged.event
    },

    /**
     * Logs fire tending, a note or a change of the pit's set on a cooker, corrects or takes back one. A change of
     * the set moves the cooker's set, and its band by as much.
     * @throws HttpProblem as for a piece
     */
    async logOnCooker(by: By, cookerId: number, event: NewEvent): Promise<CookEvent> {
      if (!isOfCooker(event) && event.fact.kind !== 'note' && event.fact.kind !== 'withdrawn') {
        throw unprocessable('That is logged on a piece, not on a cooker.')
      }
      const happenedAt = notInFuture(event.happenedAt, clock, 'happenedAt')
      const logged = await db.transaction(async (trx) => {
        const events = eventsRepository(trx)
        await events.lockId(event.id)
        const known = await events.find(event.id)
        if (known) return { event: sameEvent(known, event, { cookerId }), isNew: false }
        const setBefore = await pitSetOf(trx, cookerId)
        const corrected = correctedBy(event, await events.ofCooker(cookerId))
        const pitSetBeforeC =
          event.fact.kind !== 'pit_set'
            ? null
            : corrected
              ? await setBeforeOf(trx, cookerId, corrected.id)
              : setBefore
        await events.add([{ ...toStore(by, event, happenedAt, { cookerId }), pitSetBeforeC }])
        const entry = await stored(trx, event.id)
        await applyPitSet(trx, cookerId, entry)
        await announcePiecesOn(trx, cookerId)
        return { event: entry, isNew: true }
      })
      if (logged.isNew) {
        const cooker = (await cookers.listOfSite(by.site.id)).find(({ id }) => id === cookerId)
        publish(by.site.slug, {
          events: await withCorrected(logged.event),
          ...(cooker ? { cookers: [cooker] } : {}),
        })
      }
      return logged.event
    },
  }

  function toStore(
    by: By,
    event: NewEvent,
    happenedAt: number,
    subject: EventToStore['subject'],
  ): EventToStore {
    return {
      id: event.id,
      siteId: by.site.id,
      subject,
      happenedAt,
      recordedAt: clock.now(),
      userId: by.person.userId,
      fact: event.fact,
      note: event.note === undefined || event.note === '' ? null : event.note,
      correctsId: event.correctsId ?? null,
    }
  }

  /** An event, and the one that it corrects, which now says so. */
  async function withCorrected(event: CookEvent): Promise<CookEvent[]> {
    const corrected =
      event.correctsId === null ? undefined : await eventsRepository(db).find(event.correctsId)
    return corrected ? [corrected, event] : [event]
  }
}

function isOfCooker(event: NewEvent): boolean {
  return cookerEventKinds.some((kind) => kind === event.fact.kind)
}

async function stored(trx: Knex, id: string): Promise<CookEvent> {
  const event = await eventsRepository(trx).find(id)
  if (!event) throw new Error(`Event ${id} is gone right after it was logged.`)
  return event
}

async function setBeforeOf(trx: Knex, cookerId: number, eventId: string): Promise<number | null> {
  const changes = await eventsRepository(trx).pitSetChanges([cookerId])
  return changes.find((change) => change.id === eventId)?.pitSetBeforeC ?? null
}

/** The event that was logged under this id before, when it says the same. */
function sameEvent(
  known: CookEvent,
  event: NewEvent,
  subject: { pieceId?: number; cookerId?: number },
): CookEvent {
  const isSame =
    known.pieceId === (subject.pieceId ?? null) &&
    known.cookerId === (subject.cookerId ?? null) &&
    Date.parse(known.happenedAt) === Date.parse(event.happenedAt) &&
    known.correctsId === (event.correctsId ?? null) &&
    (known.note ?? '') === (event.note ?? '') &&
    isSameFact(known.fact, event.fact)
  if (!isSame) throw conflict('An event with this id is logged already, with other content.')
  return known
}
