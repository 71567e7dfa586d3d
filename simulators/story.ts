import type { WrapMethod } from '#shared/domain/cooking.ts'

import type { Cut } from './physics/piece-traits.ts'

/** What happened to a piece. Cookers go by their name at the site; times are ms since 1970 UTC. */
export type PieceFact =
  | { kind: 'on'; cooker: string; position?: string }
  | { kind: 'spritz' }
  | { kind: 'wrap'; method: Exclude<WrapMethod, 'none'> }
  | { kind: 'moved'; toCooker: string }
  | { kind: 'probe_reseated' }
  | { kind: 'pull'; by: 'temperature' | 'feel' }
  | { kind: 'rest' }
  | { kind: 'hold'; cooker?: string | undefined }
  | { kind: 'sliced' }
  | { kind: 'weighed'; stage: 'trimmed' | 'cooked' | 'sliced'; kg: number }
  | { kind: 'note' }

export type CookerFact = { kind: 'fire_tended' } | { kind: 'pit_set'; pitSetC: number }

/** A logged event: when it happened, when it was written down, by whom (e-mail), in whose words. */
export interface Logged<Fact> {
  atMs: number
  recordedMs: number
  fact: Fact
  by: string
  note?: string
}

/** What must be known of a piece to simulate it again. */
export interface PieceIdentity {
  site: string
  label: string
  cured: boolean
  cut: Cut
  rawKg: number
  onMs: number
}

/**
 * The seed of a piece's traits: from the house's seed and what the crew wrote down of it. The moment it went on
 * is left out on purpose: a corrected time does not change the meat.
 */
export function pieceSeed(houseSeed: string, piece: { label: string; rawKg: number }): string {
  return `${houseSeed}/piece/${piece.label}/${String(Math.round(piece.rawKg * 1000))}`
}
