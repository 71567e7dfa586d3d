import { seededRandom } from '#shared/domain/random.ts'

import { drawPieceTraits, type PieceTraits } from './physics/piece-traits.ts'
import { createPieceSimulation, INNER_STEP_S, type PieceSurroundings } from './piece-simulation.ts'
import { pieceSeed, type PieceFact, type PieceIdentity } from './story.ts'

/** A piece at one moment. */
export interface PieceMoment {
  coreC: number
  /** The air round it. */
  airC: number
}

/** A piece's whole course, computed as far as it was asked for. */
export interface PieceCurve {
  readonly seed: string
  readonly traits: PieceTraits
  readonly onMs: number
  /** Where it stands: a cooker's name, or nothing while it lies in the room. */
  readonly standsOn: string | undefined
  at(atMs: number): PieceMoment
  /** As it is at the last moment that was asked for. */
  massKg(): number
  /** Something that happened, not earlier than the last moment that was asked for. */
  apply(atMs: number, fact: PieceFact): void
}

/**
 * The course of one piece through the places it stands in. The same seed, start and events give the same course,
 * whenever and in whatever steps it is asked for: all happens on a grid of ten seconds.
 */
export function createPieceCurve(options: {
  houseSeed: string
  piece: PieceIdentity
  /** What is round the piece at a place of its site, at a moment. */
  surroundings: (place: string | undefined, atMs: number) => PieceSurroundings
}): PieceCurve {
  const { houseSeed, piece, surroundings } = options
  const seed = pieceSeed(houseSeed, piece)
  const random = seededRandom(seed)
  const traits = drawPieceTraits(random, piece)
  const startCoreC = Math.min(9, Math.max(2, 5 + 1.5 * random.normal()))
  const simulation = createPieceSimulation({ traits, startCoreC })
  const onMs = Math.floor(piece.onMs / STEP_MS) * STEP_MS
  const coreC = [startCoreC]
  const airC = [startCoreC]
  const pending: { atMs: number; fact: PieceFact }[] = []
  let standsOn: string | undefined

  const settle = (atMs: number) => {
    for (let next = pending[0]; next && next.atMs <= atMs; next = pending[0]) {
      pending.shift()
      standsOn = placeAfter(next.fact, standsOn)
      if (next.fact.kind === 'wrap') simulation.wrap(next.fact.method)
      if (next.fact.kind === 'spritz') simulation.spritz()
    }
  }

  return {
    seed,
    traits,
    onMs,
    get standsOn() {
      return standsOn
    },
    at(atMs) {
      const slot = Math.max(0, Math.floor((atMs - onMs) / STEP_MS))
      while (coreC.length <= slot) {
        const fromMs = onMs + (coreC.length - 1) * STEP_MS
        settle(fromMs)
        const around = surroundings(standsOn, fromMs)
        simulation.step(INNER_STEP_S, around)
        coreC.push(simulation.coreC)
        airC.push(around.airC)
      }
      return { coreC: coreC[slot] ?? startCoreC, airC: airC[slot] ?? startCoreC }
    },
    massKg: () => simulation.massKg,
    apply(atMs, fact) {
      const onGridMs = Math.max(onMs, Math.floor(atMs / STEP_MS) * STEP_MS)
      const reachedMs = onMs + (coreC.length - 1) * STEP_MS
      if (onGridMs < reachedMs) throw new RangeError('The piece has been simulated beyond this moment.')
      const place = pending.findIndex((other) => other.atMs > onGridMs)
      pending.splice(place < 0 ? pending.length : place, 0, { atMs: onGridMs, fact })
      settle(reachedMs)
    },
  }
}

/** Where a piece stands after something happened to it. */
export function placeAfter(fact: PieceFact, before: string | undefined): string | undefined {
  switch (fact.kind) {
    case 'on':
      return fact.cooker
    case 'moved':
      return fact.toCooker
    case 'hold':
      return fact.cooker
    case 'pull':
    case 'rest':
    case 'sliced':
      return undefined
    default:
      return before
  }
}

const STEP_MS = INNER_STEP_S * 1000
