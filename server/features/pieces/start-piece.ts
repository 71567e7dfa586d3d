import type { Knex } from 'knex'
import type { CookEvent, EventFact } from '#shared/contract/event.ts'
import type { NewPiece, Piece } from '#shared/contract/piece.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { Person, SiteContext } from '../../http/mount.ts'
import { conflict, unprocessable } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import { eventsRepository, isSameFact, notInFuture } from '../events/index.ts'
import type { RecipesService } from '../recipes/service.ts'
import { applyEvents } from './apply-events.ts'
import { placeProbeIn } from './place-probe.ts'
import { piecesRepository } from './repository.ts'

/** Who changes something, and where. */
export interface By {
  person: Person
  site: SiteContext
}

export type Started =
  | { pieceId: number; event: CookEvent; takenFrom: number | undefined }
  /** The same start was sent before: this is its piece. */
  | { again: Piece }

/**
 * Makes a piece, logs its going on, and places its probe.
 * @throws HttpProblem 409 when the cooker is full, the probe in use, or the event id known with other content;
 *   422 when something named is not the site's or the time is still to come
 */
export async function startPiece(
  trx: Knex,
  { clock, recipes }: { clock: Clock; recipes: RecipesService },
  { person, site }: By,
  start: NewPiece,
): Promise<Started> {
  const onAt = notInFuture(start.onAt, clock, 'onAt')
  const fact: EventFact = {
    kind: 'on',
    cookerId: start.cookerId,
    ...(start.position === undefined ? {} : { position: start.position }),
  }
  const events = eventsRepository(trx)
  await events.lockId(start.eventId)
  const known = await events.find(start.eventId)
  if (known) return { again: await sameStart(trx, site, known, fact, onAt) }

  const now = clock.now()
  const piece = await addPiece(trx, recipes, site.id, start, now)
  const on = {
    id: start.eventId,
    siteId: site.id,
    subject: { pieceId: piece.id },
    happenedAt: onAt,
    recordedAt: now,
    userId: person.userId,
    fact,
    note: null,
    correctsId: null,
  }
  await events.add([on])
  await applyEvents(trx, site.id, piece, [on], { news: on })
  const takenFrom =
    start.channelId === undefined ? undefined : await placeProbeIn(trx, site.id, piece, start.channelId, onAt)
  await recordAudit(trx, {
    at: now,
    userId: person.userId,
    siteId: site.id,
    action: 'piece.start',
    subject: `piece ${piece.id}`,
    data: { ...start },
  })
  const event = await events.find(start.eventId)
  if (!event) throw new Error(`Event ${start.eventId} is gone right after it was logged.`)
  return { pieceId: piece.id, event, takenFrom }
}

export function noService() {
  return unprocessable('This site has no such service.', [
    { at: 'serviceId', message: 'Choose another service.' },
  ])
}

async function addPiece(
  trx: Knex,
  recipes: RecipesService,
  siteId: number,
  start: NewPiece,
  now: number,
): Promise<Piece> {
  const pieces = piecesRepository(trx)
  const recipe = await recipes.find(start.recipeId)
  if (!recipe) {
    throw unprocessable('The house has no such recipe.', [
      { at: 'recipeId', message: 'Choose another recipe.' },
    ])
  }
  if (start.serviceId !== undefined && !(await pieces.isServiceOf(siteId, start.serviceId))) throw noService()
  const id = await pieces.add({
    siteId,
    label: start.label,
    serviceId: start.serviceId ?? null,
    recipeId: recipe.id,
    cured: start.cured ?? recipe.cured,
    rawKg: start.rawKg,
    wrapAtC: start.wrapAtC ?? recipe.wrapAtC,
    wrapMethod: start.wrapMethod ?? recipe.wrapMethod,
    pullAtC: start.pullAtC ?? recipe.pullAtC,
    createdAt: now,
  })
  const piece = await pieces.find(id)
  if (!piece) throw new Error(`Piece ${id} is gone right after it was made.`)
  return piece
}

/** The piece of a start that was sent before; the same id with other content is another start. */
async function sameStart(
  trx: Knex,
  site: SiteContext,
  known: CookEvent,
  fact: EventFact,
  onAt: number,
): Promise<Piece> {
  const piece = known.pieceId === null ? undefined : await piecesRepository(trx).find(known.pieceId)
  const isSame =
    piece?.site === site.slug && Date.parse(known.happenedAt) === onAt && isSameFact(known.fact, fact)
  if (!piece || !isSame) throw conflict('An event with this id is logged already, with other content.')
  return piece
}
