import { farOutsideC, outsideBand } from '@/shared/domain/pit-state.ts'
import type { ChartStyle } from './chart-style.ts'
import type { LanePit } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { withGaps } from './piece-lines.ts'
import type { Shape, XY } from './shapes.ts'

/** The ribbon is at its full height this far outside the band, K. */
export const fullHeightC = farOutsideC * 1.6

/** A stretch of time in which a pit stayed outside its band, on one side. */
export interface Excursion {
  /** Times in ms since 1970 UTC with the distance from the band in K: positive above, negative below. */
  points: readonly (readonly [at: number, byC: number])[]
  far: boolean
}

/**
 * The pit along the lane: a thin grey line while it is in its band (broken where nothing was measured), swelling
 * up or down in amber, or red when far out, where it is not. Colour only for the abnormal.
 */
export function ribbonShapes(pit: LanePit, frame: LaneFrame, style: ChartStyle): Shape[] {
  const { palette } = style
  const { ribbon } = frame
  const middle = ribbon.y + ribbon.height / 2
  const reach = ribbon.height / 2 - 1
  const y = (byC: number) => middle - Math.max(-1, Math.min(1, byC / fullHeightC)) * reach
  return [
    ...measuredSpans(pit).map<Shape>(([from, to]) => ({
      kind: 'polyline',
      points: [
        [frame.x(from), middle],
        [frame.x(to), middle],
      ],
      stroke: palette.mark,
      width: Math.max(1, style.rule),
    })),
    ...excursions(pit).map<Shape>(({ points, far }) => ({
      kind: 'polygon',
      points: [
        [frame.x(points[0]?.[0] ?? 0), middle],
        ...points.map(([at, byC]): XY => [frame.x(at), y(byC)]),
        [frame.x(points.at(-1)?.[0] ?? 0), middle],
      ],
      fill: far ? palette.red : palette.amber,
    })),
  ]
}

/** Every stretch outside the band, in time order. A gap, the band and the other side each end one. */
export function excursions(pit: LanePit): Excursion[] {
  const found: Excursion[] = []
  let running: [number, number][] = []
  const end = () => {
    if (running.length > 1) {
      const worst = Math.max(...running.map(([, byC]) => Math.abs(byC)))
      found.push({ points: running, far: worst >= farOutsideC })
    }
    running = []
  }
  for (const [at, c] of withGaps(pit.line)) {
    const byC = c === null ? 0 : outsideBand(c, pit)
    const side = Math.sign(byC)
    if (side === 0 || side !== Math.sign(running.at(-1)?.[1] ?? side)) end()
    if (side !== 0) running.push([at, byC])
  }
  end()
  return found
}

function measuredSpans(pit: LanePit): [number, number][] {
  const spans: [number, number][] = []
  let open: [number, number] | undefined
  for (const [at, c] of withGaps(pit.line)) {
    if (c === null) {
      open = undefined
    } else if (open === undefined) {
      open = [at, at]
      spans.push(open)
    } else {
      open[1] = at
    }
  }
  return spans
}
