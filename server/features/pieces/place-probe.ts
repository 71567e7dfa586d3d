import type { Knex } from 'knex'
import type { Piece } from '#shared/contract/piece.ts'
import { conflict, unprocessable } from '../../http/problem.ts'
import { probesRepository } from './probes.ts'
import { piecesRepository } from './repository.ts'

/**
 * Puts a channel's probe into a piece from a moment (ms since 1970 UTC) on, or takes the piece's probe out (null).
 * A probe that is still in a piece that was pulled is taken over, from no earlier than its pull; so is one that was
 * in something else until later than the moment, from then on.
 * @returns the piece that the probe was taken over from, if there is one
 * @throws HttpProblem 422 when the site has no such channel, 409 when the probe reads a pit or is in a piece that cooks
 */
export async function placeProbeIn(
  trx: Knex,
  siteId: number,
  piece: Piece,
  channelId: number | null,
  at: number,
): Promise<number | undefined> {
  const probes = probesRepository(trx)
  if (channelId === null) {
    await probes.endIn(piece.id, at)
    return undefined
  }
  if (!(await probes.hold(siteId, channelId))) {
    throw unprocessable('This site has no such probe.', [
      { at: 'channelId', message: 'Choose another probe.' },
    ])
  }
  const last = await probes.lastOf(channelId)
  const isInUse = last !== undefined && last.to === null
  if (isInUse && last.piece?.id === piece.id) return undefined
  if (isInUse && last.cooker) throw inUse(`reads the pit of ${last.cooker.name}`)
  if (isInUse && last.piece && last.piece.pulledAt === null)
    throw inUse(`is in ${last.piece.label}, which still cooks`)

  // In a piece that was pulled it stayed until the pull at least, whatever is said now.
  const free = Math.max(at, isInUse ? (last.piece?.pulledAt ?? at) : at)
  if (isInUse) {
    await probes.end(last.id, free)
    if (last.piece) await piecesRepository(trx).touch(last.piece.id)
  }
  await probes.endIn(piece.id, free)
  await probes.begin(channelId, piece.id, free)
  return isInUse ? last.piece?.id : undefined
}

function inUse(where: string) {
  return conflict(`That probe ${where}. Take another, or take it out there first.`, [
    { at: 'channelId', message: `It ${where}.` },
  ])
}
