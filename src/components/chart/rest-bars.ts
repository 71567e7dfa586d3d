import type { ChartStyle } from './chart-style.ts'
import type { LaneData, LanePiece } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import type { PlacedLabel } from './label-places.ts'
import type { Shape } from './shapes.ts'

/**
 * Rest as a hollow bar and hold as a filled one, in the row of the piece's label; from now to the service hour a
 * thin broken line says how long it still has to keep.
 */
export function restBarShapes(
  data: LaneData,
  labels: readonly PlacedLabel[],
  frame: LaneFrame,
  style: ChartStyle,
): Shape[] {
  return data.pieces.flatMap((piece, index) => {
    if (piece.pulledAt === null) return []
    const label = labels.find((placed) => placed.what === 'rest' && placed.pieceId === piece.id)
    const row =
      label === undefined ? frame.plot.y + style.bar * (1 + 1.6 * index) : label.box.y + label.box.height / 2
    return [
      ...barsOf(piece, data.window.now, row, frame, style),
      ...keepLine(piece, data, label, row, frame, style),
    ]
  })
}

function barsOf(piece: LanePiece, now: number, row: number, frame: LaneFrame, style: ChartStyle): Shape[] {
  const { mark, quiet, ground } = style.palette
  const end = Math.min(piece.doneAt ?? now, now)
  const shapes: Shape[] = []
  const bar = (from: number, to: number, held: boolean) => {
    const left = Math.max(0, frame.x(from))
    const width = frame.x(to) - left
    if (width <= 0) return
    const y = row - style.bar / 2
    shapes.push({
      kind: 'rect',
      x: left,
      y,
      width,
      height: style.bar,
      fill: held ? mark : ground,
      stroke: held ? mark : quiet,
      line: Math.max(1, style.rule),
    })
  }
  const restFrom = piece.restAt ?? piece.pulledAt
  if (restFrom !== null) bar(restFrom, Math.min(piece.holdAt ?? end, end), false)
  if (piece.holdAt !== null) bar(piece.holdAt, end, true)
  return shapes
}

function keepLine(
  piece: LanePiece,
  data: LaneData,
  label: PlacedLabel | undefined,
  row: number,
  frame: LaneFrame,
  style: ChartStyle,
): Shape[] {
  const service = data.services.find((at) => at > data.window.now)
  if (service === undefined || label === undefined || piece.doneAt !== null) return []
  const from = label.box.x + label.box.width + style.gap
  const to = Math.min(frame.width, frame.x(service))
  if (to <= from) return []
  return [
    {
      kind: 'polyline',
      points: [
        [from, row],
        [to, row],
      ],
      stroke: style.palette.mark,
      width: style.rule,
      dash: [style.gap * 0.8, style.gap * 0.6],
    },
  ]
}
