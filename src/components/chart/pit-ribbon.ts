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
 * up or down in amber, or red when far out, where it is not. Colour only for the abnormal. On a large lane the band
 * has a height of its own and the pit's line is drawn in it.
 */
export function ribbonShapes(pit: LanePit, frame: LaneFrame, style: ChartStyle): Shape[] {
  const { palette } = style
  const scale = ribbonScale(pit, frame, style)
  const line = (points: XY[], stroke: string, width: number): Shape => ({
    kind: 'polyline',
    points,
    stroke,
    width,
  })
  const thin = Math.max(1, style.rule)
  const calm = measuredRuns(pit).flatMap((run) => {
    if (style.scale)
      return [
        line(
          run.map(([at, c]): XY => [frame.x(at), scale.y(c)]),
          palette.text,
          thin * 1.5,
        ),
      ]
    const [first, last] = [run[0], run.at(-1)]
    if (first === undefined || last === undefined) return []
    return [
      line(
        [first, last].map(([at]): XY => [frame.x(at), scale.middle]),
        palette.mark,
        thin,
      ),
    ]
  })
  const edges = style.scale
    ? [pit.bandLowC, pit.bandHighC].map((c) =>
        line(
          [
            [0, scale.y(c)],
            [frame.width, scale.y(c)],
          ],
          palette.hairline,
          1,
        ),
      )
    : []
  const out = excursions(pit).map<Shape>(({ points, far }) => {
    const edgeC = (points[0]?.[1] ?? 0) < 0 ? pit.bandLowC : pit.bandHighC
    return {
      kind: 'polygon',
      points: [
        [frame.x(points[0]?.[0] ?? 0), scale.y(edgeC)],
        ...points.map(([at, byC]): XY => [frame.x(at), scale.y(edgeC + byC)]),
        [frame.x(points.at(-1)?.[0] ?? 0), scale.y(edgeC)],
      ],
      fill: far ? palette.red : palette.amber,
    }
  })
  return [...edges, ...calm, ...out]
}

/** Heights in the ribbon: the band in the middle (a line in small lanes), the ends where a pit is far out. */
function ribbonScale(
  pit: LanePit,
  frame: LaneFrame,
  style: ChartStyle,
): { middle: number; y: (c: number) => number } {
  const { ribbon } = frame
  const middle = ribbon.y + ribbon.height / 2
  const reach = ribbon.height / 2 - 1
  const band = style.scale ? reach * 0.45 : 0
  const centreC = (pit.bandLowC + pit.bandHighC) / 2
  const halfC = (pit.bandHighC - pit.bandLowC) / 2
  return {
    middle,
    y: (c) => {
      const out = Math.max(-1, Math.min(1, outsideBand(c, pit) / fullHeightC))
      const within = Math.max(-1, Math.min(1, (c - centreC) / halfC))
      return middle - within * band - out * (reach - band)
    },
  }
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

/** The stretches in which something was measured. */
function measuredRuns(pit: LanePit): [at: number, c: number][][] {
  const runs: [number, number][][] = []
  let open: [number, number][] | undefined
  for (const [at, c] of withGaps(pit.line)) {
    if (c === null) {
      open = undefined
      continue
    }
    if (open === undefined) runs.push((open = []))
    open.push([at, c])
  }
  return runs
}
