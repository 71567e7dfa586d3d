import type { ChartStyle } from './chart-style.ts'
import type { FanEdges } from './fan.ts'
import { fanCover, fanEdges } from './fan.ts'
import type { LaneData, LanePiece } from './lane-data.ts'
import type { Box, LaneFrame } from './lane-frame.ts'
import type { Candidate } from './place-boxes.ts'
import { placeBox } from './place-boxes.ts'
import type { Shape, XY } from './shapes.ts'
import type { TextBlock } from './text-block.ts'
import { blockShapes } from './text-block.ts'

/** A label in its place. */
export interface PlacedLabel {
  what: 'now' | 'flag' | 'rest'
  /** The piece it names; null for one that names many. */
  pieceId: number | null
  box: Box
  shapes: Shape[]
}

/** Where labels may go, and those already placed. */
export interface Layout {
  data: LaneData
  frame: LaneFrame
  style: ChartStyle
  fanned: readonly LanePiece[]
  edges: readonly FanEdges[]
  bounds: Box
  placed: PlacedLabel[]
  /** What the places taken so far cost together: the lower, the better the layout. */
  cost: number
}

interface BlockCandidate extends Candidate {
  block: TextBlock
}

/** An empty layout right of the now line; labels keep off the fans of `fanned`. */
export function labelLayout(
  data: LaneData,
  frame: LaneFrame,
  style: ChartStyle,
  fanned: readonly LanePiece[],
): Layout {
  const left = frame.x(data.window.now) + style.gap * 0.6
  const bounds = { x: left, y: 0, width: frame.width - left - style.gap / 2, height: frame.ribbon.y }
  const edges = fanned.map((piece) => fanEdges(piece, frame))
  return { data, frame, style, fanned, edges, bounds, placed: [], cost: 0 }
}

/** Names a piece at the end of its line. False when there is no room. */
export function placeNow(layout: Layout, piece: LanePiece, blocks: readonly TextBlock[]): boolean {
  const c = piece.latest?.c ?? piece.line.at(-1)?.[1] ?? layout.frame.topC / 2
  return placeAt(layout, piece.id, 'now', layout.frame.y(c), blocks)
}

/** Puts a block right of the now line as near to a height as it can, in a second or third column if it must. */
export function placeAt(
  layout: Layout,
  pieceId: number | null,
  what: 'now' | 'rest',
  y: number,
  blocks: readonly TextBlock[],
): boolean {
  const { bounds, style, frame } = layout
  const extra = (box: Box) => coverOf(layout, box) + barCover(layout, box) / 2
  const candidates = blocks.flatMap((block, variant) =>
    columnsFor(layout, block).flatMap((x, column) =>
      heights(layout, block).map((top): BlockCandidate => {
        const off = Math.abs(top + block.height / 2 - y)
        const cost = variant * 2 + column * 3 + off / style.small
        return { x, y: top, width: block.width, height: block.height, block, cost, extra }
      }),
    ),
  )
  const found = placeBox(candidates, boxesOf(layout), bounds)
  if (found === null) return false
  layout.cost += found.cost
  const { best } = found
  const leader = leaderTo(best, [frame.x(layout.data.window.now), y], layout)
  layout.placed.push({
    what,
    pieceId,
    box: boxOf(best),
    shapes: [...leader, backing(best, style), ...blockShapes(best.block, best.x, best.y, style)],
  })
  return true
}

/** Puts what a pulled piece does into a row from the top down; its bars are drawn to the left of it. */
export function placeRow(layout: Layout, piece: LanePiece, blocks: readonly TextBlock[]): boolean {
  const { bounds, style } = layout
  const candidates = blocks.flatMap((block, variant) =>
    heights(layout, block).map((top): BlockCandidate => {
      const box = { x: bounds.x, y: top, width: block.width, height: block.height }
      return { ...box, block, cost: variant * 2 + top / style.small, extra: (at) => 8 * coverOf(layout, at) }
    }),
  )
  const found = placeBox(candidates, boxesOf(layout), bounds)
  if (found === null) return false
  layout.cost += found.cost
  const { best } = found
  layout.placed.push({
    what: 'rest',
    pieceId: piece.id,
    box: boxOf(best),
    shapes: [backing(best, style), ...blockShapes(best.block, best.x, best.y, style)],
  })
  return true
}

/** Puts a flag near the end of its fan, where it covers least of any fan, with a pole and a line to the pull. */
export function placeFlag(layout: Layout, piece: LanePiece, blocks: readonly TextBlock[]): boolean {
  if (piece.pull === null) return false
  const { frame, bounds, style } = layout
  const pole = style.gap
  const right = bounds.x + bounds.width
  const point: XY = [Math.min(frame.x(piece.pull.p50), right), frame.y(piece.pullAtC)]
  const end = Math.min(frame.x(piece.pull.p90), right)
  const extra = (box: Box) =>
    9 * coverOf(layout, box) + barCover(layout, box) + leaderCover(layout, box, point)
  const candidates = blocks.flatMap((block, variant) => {
    const width = block.width + pole
    const places = [end + style.gap, point[0] + style.gap * 1.5, point[0] - width / 2, right - width]
    for (let x = bounds.x; x < right - width; x += width / 4) places.push(x)
    return places.flatMap((x) =>
      heights(layout, block).map((top): BlockCandidate => {
        const box = { x, y: top, width, height: block.height }
        const away = Math.abs(x - end - style.gap) * 0.35 + Math.abs(top + block.height / 2 - point[1])
        return { ...box, block, cost: variant * 1.2 + away / style.small, extra }
      }),
    )
  })
  const found = placeBox(candidates, boxesOf(layout), bounds)
  if (found === null) return false
  layout.cost += found.cost
  const { best } = found
  layout.placed.push({
    what: 'flag',
    pieceId: piece.id,
    box: boxOf(best),
    shapes: [
      leaderOf(best, point, layout),
      backing(best, style),
      poleOf(best, layout),
      ...blockShapes(best.block, best.x + pole, best.y, style),
    ],
  })
  return true
}

function poleOf(box: Box, { style }: Layout): Shape {
  const x = box.x + style.gap * 0.3
  return {
    kind: 'polyline',
    points: [
      [x, box.y + box.height * 0.08],
      [x, box.y + box.height * 0.92],
    ],
    stroke: style.palette.text,
    width: Math.max(1.5, style.coreLine * 0.6),
  }
}

function leaderOf(box: Box, point: XY, { style }: Layout): Shape {
  const end = leaderEnd(box, point, style)
  return { kind: 'polyline', points: [point, end], stroke: style.palette.mark, width: style.rule }
}

/** Where a flag's line meets its pole. */
function leaderEnd(box: Box, [, y]: XY, style: ChartStyle): XY {
  return [box.x + style.gap * 0.3, Math.min(box.y + box.height, Math.max(box.y, y))]
}

/** The ground behind a label, nearly opaque: what runs under it is still felt, and the text is read. */
function backing(box: Box, { palette }: ChartStyle): Shape {
  return { kind: 'rect', ...boxOf(box), fill: `${palette.ground}d0` }
}

/** A thin line from a line's end to its label where the label had to move away. */
function leaderTo(box: Box, [x, y]: XY, { style }: Layout): Shape[] {
  const middle = box.y + box.height / 2
  const near = Math.abs(middle - y) < box.height * 0.6 && box.x - x < style.gap * 2
  if (near) return []
  return [
    {
      kind: 'polyline',
      points: [
        [x, y],
        [box.x - style.gap * 0.2, middle],
      ],
      stroke: style.palette.mark,
      width: style.rule,
    },
  ]
}

function columnsFor({ bounds, style }: Layout, block: TextBlock): number[] {
  const step = Math.min(block.width, style.small * 5) + style.gap
  return [0, 1, 2, 3].map((column) => bounds.x + column * step)
}

function heights({ bounds, style }: Layout, block: TextBlock): number[] {
  const last = bounds.y + bounds.height - block.height
  if (last < bounds.y) return []
  // Fine enough for a low lane; in a high one finer places would only cost time.
  const step = Math.max(style.small / 3, (last - bounds.y) / 20)
  const tops: number[] = [last]
  for (let top = bounds.y; top < last; top += step) tops.push(top)
  return tops
}

function coverOf({ edges }: Layout, box: Box): number {
  return edges.reduce((sum, fan) => sum + fanCover(fan, box), 0)
}

/** The bars on the pull rule must stay readable: a flag over one costs. */
function barCover({ fanned, frame, style }: Layout, box: Box): number {
  return (
    fanned.filter((piece) => {
      if (piece.pull === null) return false
      const y = frame.y(piece.pullAtC)
      const touchesHeight = y > box.y - style.mark && y < box.y + box.height + style.mark
      return touchesHeight && frame.x(piece.pull.p10) < box.x + box.width && frame.x(piece.pull.p90) > box.x
    }).length * 6
  )
}

/** A flag's line to its pull must not run through another label. */
function leaderCover(layout: Layout, box: Box, point: XY): number {
  const end = leaderEnd(box, point, layout.style)
  return layout.placed.filter((label) => crosses(point, end, label.box)).length * 12
}

function crosses([x1, y1]: XY, [x2, y2]: XY, box: Box): boolean {
  const tries = 12
  for (let i = 0; i <= tries; i++) {
    const x = x1 + ((x2 - x1) * i) / tries
    const y = y1 + ((y2 - y1) * i) / tries
    if (x > box.x && x < box.x + box.width && y > box.y && y < box.y + box.height) return true
  }
  return false
}

function boxesOf(layout: Layout): Box[] {
  return layout.placed.map((label) => label.box)
}

function boxOf({ x, y, width, height }: Box): Box {
  return { x, y, width, height }
}
