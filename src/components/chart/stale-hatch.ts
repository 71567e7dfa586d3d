import type { ChartStyle } from './chart-style.ts'
import type { LaneData } from './lane-data.ts'
import type { Box, LaneFrame } from './lane-frame.ts'
import type { Shape } from './shapes.ts'

/**
 * Hatching over the time for which nothing was heard, up to now: over the ribbon for a silent pit, in a band at the
 * height of the last value for a silent piece. What is hatched is not known.
 */
export function staleShapes(data: LaneData, frame: LaneFrame, style: ChartStyle): Shape[] {
  const now = frame.x(data.window.now)
  const shapes: Shape[] = []
  const over = (since: number, y: number, height: number) => {
    const x = Math.max(0, Math.min(frame.x(since), now - style.gap))
    shapes.push(...hatch({ x, y, width: now - x, height }, style))
  }
  if (data.pit !== null && data.pit.silentSince !== null) {
    over(data.pit.silentSince, frame.ribbon.y, frame.ribbon.height)
  }
  for (const piece of data.pieces) {
    if (piece.silentSince === null) continue
    const half = style.mark * 1.6
    const y = frame.y(piece.latest?.c ?? frame.topC / 2)
    over(piece.silentSince, Math.max(frame.plot.y, y - half), half * 2)
  }
  return shapes
}

/** Slanted strokes within a box, cut at its sides. */
export function hatch(box: Box, style: ChartStyle): Shape[] {
  const step = style.gap
  const { x, y, width, height } = box
  const shapes: Shape[] = []
  for (let start = x - height; start < x + width; start += step) {
    // The stroke runs up to the right at 45°, from (start, y + height) to (start + height, y).
    const left = Math.max(start, x)
    const right = Math.min(start + height, x + width)
    if (right <= left) continue
    shapes.push({
      kind: 'polyline',
      points: [
        [left, y + height - (left - start)],
        [right, y + height - (right - start)],
      ],
      stroke: style.palette.amber,
      width: style.rule,
    })
  }
  return shapes
}
