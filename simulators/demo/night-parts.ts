import { longestStall } from '../longest-stall.ts'
import type { CookedPiece } from '../night-run.ts'
import type { DemoRecipe } from './house.ts'

/** Where in its night a piece can stand. */
export type NightPart =
  | 'rise'
  | 'late-rise'
  | 'deep-stall'
  | 'near-wrap'
  | 'just-wrapped'
  | 'push'
  | 'near-pull'
  | 'resting'
  | 'held'

/** A part of the night: the moment in a whole cook that stands for it, and whether a piece is in it now. */
interface PartRule {
  /** In ms since 1970 UTC; undefined when this cook has no such part. */
  moment: (piece: CookedPiece, recipe: DemoRecipe) => number | undefined
  holds: (piece: CookedPiece, recipe: DemoRecipe, now: number) => boolean
}

/** Every part by a rule on the true core and on what was logged. */
export const nightParts: Record<NightPart, PartRule> = {
  rise: {
    moment: (piece) => whenCoreReaches(piece, 32),
    holds: (piece) => between(core(piece), 20, 44),
  },
  'late-rise': {
    moment: (piece) => whenCoreReaches(piece, 55),
    holds: (piece) => between(core(piece), 48, 61) && since(piece, 'wrap') === undefined,
  },
  'deep-stall': {
    moment: (piece) => {
      const stall = longestStall(beforeWrap(piece))
      return stall && stall.minutes >= 70
        ? onMs(piece) + (stall.fromMinute + 0.55 * stall.minutes) * 60_000
        : undefined
    },
    holds: (piece, recipe) => {
      const hourAgo = piece.coreC.at(-41)
      if (hourAgo === undefined || since(piece, 'wrap') !== undefined) return false
      return core(piece) - hourAgo < 1.4 && between(core(piece), 58, recipe.wrapAtC - 0.5)
    },
  },
  'near-wrap': {
    moment: (piece, recipe) => whenCoreReaches(piece, recipe.wrapAtC - 1.5),
    holds: (piece, recipe) => between(core(piece), recipe.wrapAtC - 3, recipe.wrapAtC - 0.4),
  },
  'just-wrapped': {
    moment: (piece) => later(logged(piece, 'wrap'), 9),
    holds: (piece, _recipe, now) => between(since(piece, 'wrap', now), 3, 25),
  },
  push: {
    moment: (piece, recipe) => whenCoreReaches(piece, recipe.pullAtC - 9),
    holds: (piece, recipe) =>
      between(core(piece), recipe.pullAtC - 12, recipe.pullAtC - 6) && onTheFire(piece),
  },
  'near-pull': {
    moment: (piece, recipe) => whenCoreReaches(piece, recipe.pullAtC - 2),
    holds: (piece, recipe) =>
      between(core(piece), recipe.pullAtC - 3.5, recipe.pullAtC - 0.5) && onTheFire(piece),
  },
  resting: {
    moment: (piece) => later(logged(piece, 'rest'), 11),
    holds: (piece, _recipe, now) => {
      return between(since(piece, 'rest', now), 3, 22) && since(piece, 'hold', now) === undefined
    },
  },
  held: {
    moment: (piece) => later(logged(piece, 'hold'), 75),
    holds: (piece, _recipe, now) => between(since(piece, 'hold', now), 30, 150),
  },
}

function onMs(piece: CookedPiece): number {
  return piece.model.curve.onMs
}

function core(piece: CookedPiece): number {
  return piece.coreC.at(-1) ?? NaN
}

function whenCoreReaches(piece: CookedPiece, targetC: number): number | undefined {
  const minute = piece.coreC.findIndex((value) => value >= targetC)
  return minute < 0 ? undefined : onMs(piece) + minute * 60_000
}

function beforeWrap(piece: CookedPiece): number[] {
  const wrap = logged(piece, 'wrap') ?? logged(piece, 'pull')
  return wrap === undefined ? piece.coreC : piece.coreC.slice(0, Math.round((wrap - onMs(piece)) / 60_000))
}

function logged(piece: CookedPiece, kind: string): number | undefined {
  return piece.events.find(({ fact }) => fact.kind === kind)?.atMs
}

/** Minutes since something was logged. */
function since(piece: CookedPiece, kind: string, now = 0): number | undefined {
  const atMs = logged(piece, kind)
  return atMs === undefined ? undefined : (now - atMs) / 60_000
}

function onTheFire(piece: CookedPiece): boolean {
  return logged(piece, 'pull') === undefined
}

function later(atMs: number | undefined, minutes: number): number | undefined {
  return atMs === undefined ? undefined : atMs + minutes * 60_000
}

function between(value: number | undefined, low: number, high: number): boolean {
  return value !== undefined && value >= low && value <= high
}
