import type { Knex } from 'knex'
import type { Piece } from '#shared/contract/piece.ts'
import { sequenceFault, sequenceFaults } from '#shared/domain/event-sequence.ts'
import { projectPiece, type LoggedEvent } from '#shared/domain/piece-projection.ts'
import { conflict, unprocessable } from '../../http/problem.ts'
import { placementsRepository } from './placements.ts'
import { probesRepository } from './probes.ts'
import { piecesRepository } from './repository.ts'

/**
 * Renews everything that follows from a piece's events: where it stands in its night, on which cookers it stood, how
 * long its probes were in it. News asks for a forecast once the transaction is through.
 * @param options.news the event that was just added, when there must be room for what it says
 * @throws HttpProblem 422 when the events contradict one another or name a cooker of another site, 409 when a cooker is full
 */
export async function applyEvents(
  trx: Knex,
  siteId: number,
  piece: Piece,
  events: readonly LoggedEvent[],
  options: { news?: LoggedEvent } = {},
): Promise<void> {
  const fault = sequenceFault(events)
  if (fault) throw unprocessable(sequenceFaults[fault])
  const projection = projectPiece(events)
  const cookerId = options.news && cookerOf(options.news)
  if (cookerId !== undefined) {
    const standing = projection.placements.at(-1)
    const staysThere = standing?.to === null && standing.cookerId === cookerId
    await refuseFullCooker(trx, siteId, piece, cookerId, staysThere)
  }
  const before = { onAt: ms(piece.onAt), doneAt: ms(piece.doneAt) }
  await piecesRepository(trx).saveProjection(piece.id, projection)
  await placementsRepository(trx).replace(piece.id, projection.placements)
  await probesRepository(trx).follow(piece.id, before, projection)
  // What is told of long ago asks for nothing: the next round finds what still cooks.
  if (options.news) await piecesRepository(trx).announce([piece.id])
}

/** The cooker that an event puts a piece onto. */
function cookerOf({ fact }: LoggedEvent): number | undefined {
  if (fact.kind === 'on' || fact.kind === 'hold') return fact.cookerId
  return fact.kind === 'moved' ? fact.toCookerId : undefined
}

async function refuseFullCooker(
  trx: Knex,
  siteId: number,
  piece: Piece,
  cookerId: number,
  staysThere: boolean,
): Promise<void> {
  const cooker = await placementsRepository(trx).holdSpace(siteId, cookerId, piece.id)
  if (!cooker) {
    throw unprocessable('This site has no such cooker.', [
      { at: 'cookerId', message: 'Choose another cooker.' },
    ])
  }
  // A late entry about a cooker that it has left, or stands on already, takes no place.
  if (!staysThere || cooker.holdsIt || cooker.standing < cooker.capacity) return
  const message =
    cooker.standing === 1
      ? `1 piece stands on ${cooker.name}, and no more fits.`
      : `${cooker.standing} pieces stand on ${cooker.name}; it takes ${cooker.capacity}.`
  throw conflict(message, [{ at: 'cookerId', message }])
}

function ms(instant: string | null): number | null {
  return instant === null ? null : Date.parse(instant)
}
