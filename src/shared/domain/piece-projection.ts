import { effectiveEvents } from './effective-events.ts'
import type { WrapMethod } from './cooking.ts'

/** What can happen to a piece or a cooker. The contract's schema of an event fits this. */
export type CookFact =
  | { kind: 'on'; cookerId: number; position?: string | undefined }
  | { kind: 'spritz' | 'probe_reseated' | 'rest' | 'sliced' | 'note' | 'fire_tended' | 'withdrawn' }
  | { kind: 'wrap'; method: Exclude<WrapMethod, 'none'> }
  | { kind: 'moved'; toCookerId: number; position?: string | undefined }
  | { kind: 'pull'; by: 'temperature' | 'feel' }
  | { kind: 'hold'; cookerId?: number | undefined }
  | { kind: 'weighed'; stage: 'trimmed' | 'cooked' | 'sliced'; kg: number }
  | { kind: 'pit_set'; pitSetC: number }

/** An event as logged; times in ms since 1970 UTC. */
export interface LoggedEvent {
  id: string
  correctsId: string | null
  happenedAt: number
  recordedAt: number
  fact: CookFact
}

export type Stage = 'waiting' | 'cooking' | 'wrapped' | 'pulled' | 'resting' | 'holding' | 'done'

/** A stretch of time on one cooker, half open; `to` is null while the piece stands there. */
export interface Placement {
  cookerId: number
  position: string | null
  from: number
  to: number | null
}

/** Where a piece stands in its night. Times in ms since 1970 UTC, weights in kg; null is not yet. */
export interface PieceProjection {
  stage: Stage
  onAt: number | null
  wrappedAt: number | null
  wrappedWith: Exclude<WrapMethod, 'none'> | null
  pulledAt: number | null
  restAt: number | null
  holdAt: number | null
  doneAt: number | null
  trimmedKg: number | null
  cookedKg: number | null
  slicedKg: number | null
  /** In time order, never overlapping. */
  placements: Placement[]
}

/**
 * Folds a piece's events, corrections included, into where it stands. Of several wraps the last one counts, of
 * several rests and holds too. A piece that rests, is held or sliced without anybody having logged the pull was
 * pulled by then: its pull is dated there until somebody says better. Pulling takes it off its cooker; a hold with
 * a cooker, or a move, puts it onto one again.
 */
export function projectPiece(events: readonly LoggedEvent[]): PieceProjection {
  const piece: PieceProjection = {
    stage: 'waiting',
    onAt: null,
    wrappedAt: null,
    wrappedWith: null,
    pulledAt: null,
    restAt: null,
    holdAt: null,
    doneAt: null,
    trimmedKg: null,
    cookedKg: null,
    slicedKg: null,
    placements: [],
  }
  for (const { fact, happenedAt } of effectiveEvents(events)) apply(piece, fact, happenedAt)
  piece.placements = piece.placements.filter((place) => place.to === null || place.to > place.from)
  return piece
}

function apply(piece: PieceProjection, fact: CookFact, at: number): void {
  switch (fact.kind) {
    case 'on':
      piece.onAt ??= at
      piece.stage = 'cooking'
      standOn(piece, fact.cookerId, fact.position, at)
      return
    case 'moved':
      standOn(piece, fact.toCookerId, fact.position, at)
      return
    case 'wrap':
      piece.wrappedAt = at
      piece.wrappedWith = fact.method
      if (piece.stage === 'cooking') piece.stage = 'wrapped'
      return
    case 'pull':
      piece.pulledAt = at
      takeOff(piece, at)
      if (piece.stage === 'cooking' || piece.stage === 'wrapped') piece.stage = 'pulled'
      return
    case 'rest':
      offTheFire(piece, at)
      piece.restAt = at
      piece.stage = 'resting'
      return
    case 'hold':
      offTheFire(piece, at)
      piece.holdAt = at
      piece.stage = 'holding'
      if (fact.cookerId !== undefined) standOn(piece, fact.cookerId, undefined, at)
      return
    case 'sliced':
      offTheFire(piece, at)
      takeOff(piece, at)
      piece.doneAt = at
      piece.stage = 'done'
      return
    case 'weighed':
      if (fact.stage === 'trimmed') piece.trimmedKg = fact.kg
      if (fact.stage === 'cooked') piece.cookedKg = fact.kg
      if (fact.stage === 'sliced') piece.slicedKg = fact.kg
      return
    default:
      return
  }
}

/** What rests, is held or sliced has left its fire, whether or not somebody logged the pull. */
function offTheFire(piece: PieceProjection, at: number): void {
  if (piece.stage !== 'cooking' && piece.stage !== 'wrapped') return
  piece.pulledAt = at
  takeOff(piece, at)
}

function standOn(piece: PieceProjection, cookerId: number, position: string | undefined, at: number): void {
  takeOff(piece, at)
  piece.placements.push({ cookerId, position: position ?? null, from: at, to: null })
}

function takeOff(piece: PieceProjection, at: number): void {
  const last = piece.placements.at(-1)
  if (last?.to === null) last.to = at
}
