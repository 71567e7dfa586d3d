import type { Knex } from 'knex'
import type { LatestForecast } from '#shared/contract/forecast.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { NewPiece, Piece, PieceChange, PieceDetail } from '#shared/contract/piece.ts'
import type { CookEvent } from '#shared/contract/event.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { badRequest, notFound, staleVersion, unprocessable } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import { eventsRepository, notInFuture } from '../events/index.ts'
import type { RecipesService } from '../recipes/service.ts'
import { placeProbeIn } from './place-probe.ts'
import { placementsRepository } from './placements.ts'
import { piecesRepository, type PieceToStore, type WhichPieces } from './repository.ts'
import { noService, startPiece, type By } from './start-piece.ts'

export { applyEvents } from './apply-events.ts'
export type { By } from './start-piece.ts'

export interface PiecesDeps {
  db: Knex
  clock: Clock
  recipes: RecipesService
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
  /** The newest forecast of each piece that has one. */
  latestForecasts: (pieceIds: readonly number[]) => Promise<LatestForecast[]>
}

/** The largest number that a row can have. */
const largestId = 2 ** 31 - 1

export type PiecesService = ReturnType<typeof createPiecesService>

export function createPiecesService({ db, clock, recipes, publish, latestForecasts }: PiecesDeps) {
  /** Tells watchers of pieces as they are now, and of events. @returns the first of the pieces */
  async function tell(
    siteSlug: string,
    pieceIds: readonly number[],
    events: readonly CookEvent[] = [],
  ): Promise<Piece> {
    const found = await piecesRepository(db).findAll(pieceIds)
    const pieces = pieceIds.flatMap((id) => found.filter((piece) => piece.id === id))
    publish(siteSlug, { pieces, ...(events.length > 0 ? { events: [...events] } : {}) })
    const [first] = pieces
    if (!first) throw notFound()
    return first
  }

  return {
    tell,

    /** At most `limit` pieces of a site, newest first. */
    async list(siteId: number, query: { which: WhichPieces; cursor?: string | undefined; limit: number }) {
      const before = query.cursor === undefined ? largestId : Number(query.cursor)
      if (!Number.isInteger(before) || before < 0 || before > largestId)
        throw badRequest('That cursor is not one of ours.')
      const pieces = await piecesRepository(db).page(siteId, query.which, before, query.limit + 1)
      const items = pieces.slice(0, query.limit)
      const last = pieces.length > query.limit ? items.at(-1) : undefined
      return { items, nextCursor: last ? String(last.id) : null }
    },

    /** The pieces of a site that are not sliced yet. */
    open: (siteId: number): Promise<Piece[]> => piecesRepository(db).open(siteId),

    async get(pieceId: number): Promise<PieceDetail> {
      const piece = await piecesRepository(db).find(pieceId)
      if (!piece) throw notFound()
      const [events, [forecast], cookerName] = await Promise.all([
        eventsRepository(db).ofPiece(pieceId),
        latestForecasts([pieceId]),
        piece.cookerId === null ? undefined : placementsRepository(db).cookerName(piece.cookerId),
      ])
      return {
        piece,
        cooker:
          piece.cookerId !== null && cookerName !== undefined
            ? { id: piece.cookerId, name: cookerName }
            : null,
        events,
        forecast: forecast ?? null,
      }
    },

    /**
     * Puts a piece on a cooker. The same start sent twice starts one piece.
     * @throws HttpProblem 409 when the cooker is full, the probe in use, or the event id known with other content;
     *   422 when something named is not the site's or the time is still to come
     */
    async start(by: By, start: NewPiece): Promise<Piece> {
      const started = await db.transaction((trx) => startPiece(trx, { clock, recipes }, by, start))
      if ('again' in started) return started.again
      const changed = [started.pieceId, ...(started.takenFrom === undefined ? [] : [started.takenFrom])]
      return tell(by.site.slug, changed, [started.event])
    },

    /** @throws HttpProblem 412 when somebody changed it since `version`, 422 when what is named is not the site's */
    async change(
      { person, site }: By,
      pieceId: number,
      version: number,
      change: PieceChange,
    ): Promise<Piece> {
      await db.transaction(async (trx) => {
        const pieces = piecesRepository(trx)
        const before = await pieces.hold(pieceId)
        if (!before) throw notFound()
        if (before.version !== version) {
          throw staleVersion(
            `Somebody changed ${before.label} since you opened it. Look again, then change it.`,
          )
        }
        await refuseForeign(trx, site.id, before, change)
        await pieces.change(pieceId, change)
        await recordAudit(trx, {
          at: clock.now(),
          userId: person.userId,
          siteId: site.id,
          action: 'piece.change',
          subject: `piece ${pieceId}`,
          data: { before: fieldsOf(before, change), change },
        })
        await pieces.announce([pieceId])
      })
      return tell(site.slug, [pieceId])
    },

    /**
     * Puts a probe into a piece, or takes it out (null).
     * @throws HttpProblem 409 when the probe is in use, 422 when the site has none such, the piece is sliced, or the
     *   time is before it went on or still to come
     */
    async placeProbe(
      { person, site }: By,
      pieceId: number,
      probe: { channelId: number | null; at: string },
    ): Promise<Piece> {
      const at = notInFuture(probe.at, clock, 'at')
      const changed = await db.transaction(async (trx) => {
        const pieces = piecesRepository(trx)
        const piece = await pieces.hold(pieceId)
        if (!piece) throw notFound()
        if (piece.stage === 'done')
          throw unprocessable(`${piece.label} is sliced: no probe goes in any more.`)
        if (piece.onAt !== null && at < Date.parse(piece.onAt)) {
          throw unprocessable(`That would be before ${piece.label} went on.`)
        }
        const takenFrom = await placeProbeIn(trx, site.id, piece, probe.channelId, at)
        await pieces.touch(pieceId)
        await recordAudit(trx, {
          at: clock.now(),
          userId: person.userId,
          siteId: site.id,
          action: 'piece.probe',
          subject: `piece ${pieceId}`,
          data: { from: piece.channelId, to: probe.channelId },
        })
        await pieces.announce([pieceId])
        return [pieceId, ...(takenFrom === undefined ? [] : [takenFrom])]
      })
      return tell(site.slug, changed)
    },
  }
}

/** A piece, held against every other change until the transaction ends. */
export function holdPiece(trx: Knex, pieceId: number): Promise<Piece | undefined> {
  return piecesRepository(trx).hold(pieceId)
}

/** Makes a piece that has no events yet. */
export async function addPiece(trx: Knex, piece: PieceToStore): Promise<Piece> {
  const pieces = piecesRepository(trx)
  const made = await pieces.find(await pieces.add(piece))
  if (!made) throw new Error('A piece is gone right after it was made.')
  return made
}

/** Tells the forecast job that what it knows of the pieces on a cooker has changed, once the transaction is through. */
export async function announcePiecesOn(trx: Knex, cookerId: number): Promise<void> {
  await piecesRepository(trx).announce(await placementsRepository(trx).standingOn(cookerId))
}

/** What a piece goes by must be at its site; what it follows must have gone its own way. */
async function refuseForeign(trx: Knex, siteId: number, piece: Piece, change: PieceChange): Promise<void> {
  const pieces = piecesRepository(trx)
  if (change.serviceId != null && !(await pieces.isServiceOf(siteId, change.serviceId))) throw noService()
  if (change.followsId == null) return
  const sibling = await pieces.find(change.followsId)
  const message =
    sibling?.site !== piece.site
      ? 'This site has no such piece.'
      : sibling.id === piece.id
        ? 'A piece cannot go by itself.'
        : sibling.followsId !== null
          ? `${sibling.label} goes by another piece itself.`
          : undefined
  if (message !== undefined) throw unprocessable(message, [{ at: 'followsId', message }])
}

function fieldsOf(piece: Piece, change: PieceChange): Partial<Piece> {
  return Object.fromEntries(Object.entries(piece).filter(([field]) => field in change))
}
