import type { ChartStyle } from './chart-style.ts'
import { firstAndLast, newestSpan } from './envelope.ts'
import type { Layout, PlacedLabel } from './label-places.ts'
import { labelLayout, placeAt, placeFlag, placeNow, placeRow } from './label-places.ts'
import type { LaneData, LanePiece, Say } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { flagTexts, manyText, nowTexts, restTexts } from './piece-texts.ts'
import type { TextBlock } from './text-block.ts'

/** How roomy labels may be: with every form of their text to choose from, or only the tightest. */
const tightnesses = ['roomy', 'tight'] as const
type Tightness = (typeof tightnesses)[number]

/**
 * Every label of a lane right of the now line, none over another: names at the ends of the lines, flags at the ends
 * of the fans, what rests or is held in rows. Null when they do not all fit: then the pieces must be folded.
 */
export function singleLabels(
  data: LaneData,
  frame: LaneFrame,
  style: ChartStyle,
  say: Say,
): PlacedLabel[] | null {
  const { cooking, after } = inStages(data.pieces)
  const { now } = data.window
  const byHeight = cooking.toSorted((a, b) => (b.latest?.c ?? 0) - (a.latest?.c ?? 0))
  const byPull = cooking.filter((piece) => piece.pull !== null).toSorted((a, b) => pullOf(a) - pullOf(b))
  for (const tightness of tightnesses) {
    const names = (layout: Layout) =>
      byHeight.every((piece) => placeNow(layout, piece, fitting(nowTexts(piece, now, style, say), tightness)))
    const rows = (layout: Layout) =>
      !style.flags ||
      after.every((piece) => placeRow(layout, piece, fitting(restTexts(piece, now, style, say), tightness)))
    const flags = (pieces: readonly LanePiece[]) => (layout: Layout) =>
      !style.flags ||
      pieces.every((piece) => placeFlag(layout, piece, fitting(flagTexts(piece, style, say), tightness)))
    // What is placed first gets the best place, so a few orders are tried and the best whole is taken.
    const late = byPull.toReversed()
    const runs = byPull.length > 1 ? [byPull, late] : [byPull]
    const best = bestLayout(
      runs.flatMap((run) => [
        [names, rows, flags(run)],
        [flags(run), names, rows],
      ]),
      () => labelLayout(data, frame, style, cooking),
    )
    if (best !== null) return best.placed
  }
  return null
}

/**
 * Labels of a lane whose pieces are folded: how many, the first and the last due, and what rests or is held, piece
 * by piece or, without room for that, in one line.
 */
export function foldedLabels(data: LaneData, frame: LaneFrame, style: ChartStyle, say: Say): PlacedLabel[] {
  const { cooking, after } = inStages(data.pieces)
  const due = firstAndLast(cooking)
  const fanned = due === null ? [] : [...new Set([due.first, due.last])]
  const flag = (layout: Layout, piece: LanePiece, key: 'chart.first' | 'chart.last', tightness: Tightness) =>
    placeFlag(layout, piece, fitting(flagTexts(piece, style, say, say.words(key)), tightness))
  const summary = (layout: Layout) => {
    if (cooking.length === 0) return true
    const span = newestSpan(cooking)
    const middle = span === null ? frame.topC / 2 : (span.lowC + span.highC) / 2
    return placeAt(
      layout,
      null,
      'now',
      frame.y(middle),
      manyTexts(cooking.length, 'chart.pieces', span, style, say),
    )
  }
  const keeping = (layout: Layout) => {
    if (after.length === 0) return true
    const before = [...layout.placed]
    if (after.every((piece) => placeRow(layout, piece, restTexts(piece, data.window.now, style, say))))
      return true
    layout.placed = before
    const texts = manyTexts(after.length, 'chart.afterPull', newestSpan(after), style, say)
    return placeAt(layout, null, 'rest', frame.plot.y, texts)
  }
  const flags = (tightness: Tightness) => (layout: Layout) =>
    !style.flags ||
    due === null ||
    (flag(layout, due.first, 'chart.first', tightness) &&
      (due.first === due.last || flag(layout, due.last, 'chart.last', tightness)))

  const empty = () => labelLayout(data, frame, style, fanned)
  const complete =
    bestLayout(
      [
        [summary, flags('roomy'), keeping],
        [flags('roomy'), summary, keeping],
      ],
      empty,
    ) ??
    bestLayout(
      [
        [flags('tight'), summary, keeping],
        [summary, flags('tight'), keeping],
      ],
      empty,
    )
  if (complete !== null) return complete.placed
  // No room for all of it: what is due first and how many there are matter most.
  const layout = empty()
  for (const place of [summary, flags('tight'), keeping]) place(layout)
  return layout.placed
}

type Placing = (layout: Layout) => boolean

/** Tries each order of placing on an empty layout; the cheapest that places everything, or null. */
function bestLayout(orders: readonly (readonly Placing[])[], empty: () => Layout): Layout | null {
  let best: Layout | null = null
  for (const order of orders) {
    const layout = empty()
    if (order.every((place) => place(layout)) && layout.cost < (best?.cost ?? Infinity)) best = layout
  }
  return best
}

/** Pieces that cook, and those that were pulled. */
export function inStages(pieces: readonly LanePiece[]): { cooking: LanePiece[]; after: LanePiece[] } {
  const cooks = (piece: LanePiece) =>
    piece.stage === 'cooking' || piece.stage === 'wrapped' || piece.stage === 'waiting'
  return { cooking: pieces.filter(cooks), after: pieces.filter((piece) => !cooks(piece)) }
}

function manyTexts(
  count: number,
  key: 'chart.pieces' | 'chart.afterPull',
  span: { lowC: number; highC: number } | null,
  style: ChartStyle,
  say: Say,
): TextBlock[] {
  const withSpan = manyText(say.words(key, { count }), span, style, say)
  return [withSpan, manyText(say.words(key, { count }), null, style, say)]
}

/** All forms of a text, or its tightest alone. */
function fitting(texts: readonly TextBlock[], tightness: Tightness): readonly TextBlock[] {
  return tightness === 'roomy' ? texts : texts.slice(-1)
}

function pullOf(piece: LanePiece): number {
  return piece.pull?.p50 ?? 0
}
