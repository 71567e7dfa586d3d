import type { ChartStyle } from './chart-style.ts'
import type { LaneMark, LaneMarkKind, LanePiece } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { valueAt } from './piece-lines.ts'
import type { Shape, XY } from './shapes.ts'

/** How a mark is drawn: filled for what happened, hollow for what is forecast. */
export interface MarkInk {
  stroke: string
  fill: string
  width: number
}

/**
 * Small marks for what happened: a square for the wrap, a triangle for the pull, a ring for a spritz, an arrow head
 * for a move, a cross for a probe put back, all on the piece's line; a diamond on the pit's ribbon for the fire.
 */
export function eventShapes(
  marks: readonly LaneMark[],
  pieces: readonly LanePiece[],
  frame: LaneFrame,
  style: ChartStyle,
): Shape[] {
  const { text, ground } = style.palette
  return marks.flatMap((mark) => {
    const x = frame.x(mark.at)
    if (x < 0 || x > frame.width) return []
    if (mark.kind === 'fire') {
      const y = frame.ribbon.y + frame.ribbon.height / 2
      return [markShape('fire', [x, y], style.mark, { stroke: ground, fill: text, width: 1 })]
    }
    const piece = pieces.find(({ id }) => id === mark.pieceId)
    if (piece === undefined) return []
    const c = valueAt(piece.line, mark.at)
    if (c === null) return []
    const strong = mark.kind === 'wrap' || mark.kind === 'pull'
    return [
      markShape(mark.kind, [x, frame.y(c)], strong ? style.mark : style.mark * 0.8, {
        stroke: strong ? ground : text,
        fill: strong ? text : ground,
        width: Math.max(1, style.coreLine * 0.6),
      }),
    ]
  })
}

/** A hollow square where the wrap is forecast, on the wrap rule. */
export function comingWrapShapes(piece: LanePiece, frame: LaneFrame, style: ChartStyle): Shape[] {
  if (piece.wrap === null) return []
  const { text, ground } = style.palette
  const ink = { stroke: text, fill: ground, width: Math.max(1, style.coreLine / 2) }
  return [markShape('wrap', [frame.x(piece.wrap.p50), frame.y(piece.wrapAtC)], style.mark, ink)]
}

/** A mark around a point; `half` is half its side in px. */
export function markShape(kind: LaneMarkKind, [x, y]: XY, half: number, ink: MarkInk): Shape {
  if (kind === 'spritz')
    return { kind: 'circle', x, y, radius: half, fill: ink.fill, stroke: ink.stroke, line: ink.width }
  return {
    kind: 'polygon',
    points: outlines[kind].map(([dx, dy]): XY => [x + dx * half, y + dy * half]),
    fill: ink.fill,
    stroke: ink.stroke,
    width: ink.width,
  }
}

const outlines: Record<Exclude<LaneMarkKind, 'spritz'>, readonly XY[]> = {
  wrap: corners(1),
  pull: triangle(0, -1.3),
  fire: [
    [0, -1.4],
    [1.1, 0],
    [0, 1.4],
    [-1.1, 0],
  ],
  moved: [
    [-0.9, -1.1],
    [1.2, 0],
    [-0.9, 1.1],
  ],
  reseated: triangle(0, 1.3),
  note: corners(0.65),
  weighed: [
    [-1.2, 0.9],
    [-0.7, -0.9],
    [0.7, -0.9],
    [1.2, 0.9],
  ],
}

function corners(half: number): XY[] {
  return [
    [-half, -half],
    [half, -half],
    [half, half],
    [-half, half],
  ]
}

function triangle(x: number, tip: number): XY[] {
  const base = -Math.sign(tip) * 0.8
  return [
    [x, tip],
    [x + 1.1, base],
    [x - 1.1, base],
  ]
}
