import type { ChartStyle } from './chart-style.ts'
import type { LanePiece } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { valueAt } from './piece-lines.ts'
import type { Shape, XY } from './shapes.ts'

/** The lowest and the highest of several lines at a moment, °C. */
export interface EnvelopeSlice {
  at: number
  lowC: number
  highC: number
}

/** How many pieces a lane shows one by one before it folds them. */
export const mostSingly = 6

const stepMs = 5 * 60_000

/** The span between the coolest and the hottest of the pieces, every five minutes; nulls are left out. */
export function envelope(pieces: readonly LanePiece[], from: number, to: number): EnvelopeSlice[] {
  const slices: EnvelopeSlice[] = []
  for (let at = Math.ceil(from / stepMs) * stepMs; at <= to; at += stepMs) {
    const values = pieces.map((piece) => valueAt(piece.line, at)).filter((value) => value !== null)
    if (values.length === 0) continue
    slices.push({ at, lowC: Math.min(...values), highC: Math.max(...values) })
  }
  return slices
}

/**
 * Many pieces as one body: faint lines while they are put on one after the other, and from the last one's start the
 * span between the coolest and the hottest.
 */
export function envelopeShapes(
  pieces: readonly LanePiece[],
  window: { from: number; now: number },
  frame: LaneFrame,
  style: ChartStyle,
): Shape[] {
  const { palette, coreLine } = style
  const lastStart = Math.max(window.from, ...pieces.map((piece) => piece.line[0]?.[0] ?? window.from))
  const slices = envelope(pieces, lastStart, window.now)
  const line = (points: XY[], stroke: string): Shape => ({
    kind: 'polyline',
    points,
    stroke,
    width: coreLine / 2,
  })
  const starting = pieces
    .map((piece) =>
      piece.line.filter(([at, c], i) => c !== null && at <= lastStart && (i % 5 === 0 || at === lastStart)),
    )
    .filter((points) => points.length > 1)
    .map((points) =>
      line(
        points.map(([at, c]): XY => [frame.x(at), frame.y(c ?? 0)]),
        palette.mark,
      ),
    )
  if (slices.length < 2) return starting
  const edge = (key: 'lowC' | 'highC') => slices.map((slice): XY => [frame.x(slice.at), frame.y(slice[key])])
  return [
    ...starting,
    { kind: 'polygon', points: [...edge('highC'), ...edge('lowC').toReversed()], fill: palette.fanInner },
    line(edge('highC'), palette.text),
    line(edge('lowC'), palette.text),
  ]
}

/** The piece due first and the one due last by their medians; null when none has a time. */
export function firstAndLast(pieces: readonly LanePiece[]): { first: LanePiece; last: LanePiece } | null {
  const due = pieces
    .filter((piece) => piece.pull !== null)
    .toSorted((a, b) => (a.pull?.p50 ?? 0) - (b.pull?.p50 ?? 0))
  const first = due[0]
  const last = due.at(-1)
  return first === undefined || last === undefined ? null : { first, last }
}

/** The newest reading among the pieces' lines, for labels at the envelope's end. */
export function newestSpan(pieces: readonly LanePiece[]): { lowC: number; highC: number } | null {
  const values = pieces.flatMap((piece) => (piece.latest === null ? [] : [piece.latest.c]))
  return values.length === 0 ? null : { lowC: Math.min(...values), highC: Math.max(...values) }
}
