import { farOutsideC, outsideBand, type PitBand } from '@/shared/domain/pit-state.ts'
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
  band: PitBand
  far: boolean
}

/**
 * The pit along the lane: a thin grey line while it is in its band (broken where nothing was measured), swelling
 * up or down in amber, or red when far out, where it is not. Colour only for the abnormal. On a large lane the band
 * has a height of its own and the pit's line is drawn in it.
 */
export function ribbonShapes(pit: LanePit, frame: LaneFrame, style: ChartStyle): Shape[] {
  const { palette } = style
  const scale = ribbonScale(frame, style)
  const thin = Math.max(1, style.rule)
  const calm = measuredRuns(pit).map<Shape>((run) => {
    const [first, last] = [run[0], run.at(-1)]
    if (!style.scale && first !== undefined && last !== undefined) {
      const points = [first, last].map(({ at }): XY => [frame.x(at), scale.middle])
      return { kind: 'polyline', points, stroke: palette.mark, width: thin }
    }
    const points = run.map(({ at, c, band }): XY => [frame.x(at), scale.y(c, band)])
    return { kind: 'polyline', points, stroke: palette.text, width: thin * 1.5 }
  })
  const out = excursions(pit).map<Shape>(({ points, band, far }) => {
    const edgeC = (points[0]?.[1] ?? 0) < 0 ? band.bandLowC : band.bandHighC
    return {
      kind: 'polygon',
      points: [
        [frame.x(points[0]?.[0] ?? 0), scale.y(edgeC, band)],
        ...points.map(([at, byC]): XY => [frame.x(at), scale.y(edgeC + byC, band)]),
        [frame.x(points.at(-1)?.[0] ?? 0), scale.y(edgeC, band)],
      ],
      fill: far ? palette.red : palette.amber,
    }
  })
  return [...bandEdges(scale, frame, style), ...calm, ...out]
}

/** Every stretch outside the band, in time order. A gap, the band, another band and the other side each end one. */
export function excursions(pit: LanePit): Excursion[] {
  const found: Excursion[] = []
  for (const run of measuredRuns(pit)) {
    let running: [number, number][] = []
    let runningBand: PitBand | null = null
    const end = () => {
      if (running.length > 1 && runningBand !== null) {
        const worst = Math.max(...running.map(([, byC]) => Math.abs(byC)))
        found.push({ points: running, band: runningBand, far: worst >= farOutsideC })
      }
      running = []
    }
    for (const { at, c, band } of run) {
      const byC = band === null ? 0 : outsideBand(c, band)
      const before = running.at(-1)?.[1] ?? 0
      if (byC === 0 || Math.sign(before) === -Math.sign(byC) || band !== runningBand) end()
      runningBand = band
      if (byC !== 0) running.push([at, byC])
    }
    end()
  }
  return found
}

/** The band that held at a moment. */
export function bandAt(pit: LanePit, at: number): PitBand | null {
  return pit.bands.findLast(({ from }) => from <= at)?.band ?? null
}

interface RibbonScale {
  middle: number
  y: (c: number, band: PitBand | null) => number
  /** Half the height that the band has. */
  half: number
}

/** Heights in the ribbon: the band in the middle (a line in small lanes), the ends where a pit is far out. */
function ribbonScale({ ribbon }: LaneFrame, style: ChartStyle): RibbonScale {
  const middle = ribbon.y + ribbon.height / 2
  const reach = ribbon.height / 2 - 1
  const half = style.scale ? reach * 0.45 : 0
  return {
    middle,
    half,
    y: (c, band) => {
      if (band === null) return middle
      const centreC = (band.bandLowC + band.bandHighC) / 2
      const within = clamp((c - centreC) / ((band.bandHighC - band.bandLowC) / 2))
      return middle - within * half - clamp(outsideBand(c, band) / fullHeightC) * (reach - half)
    },
  }
}

function bandEdges({ middle, half }: RibbonScale, frame: LaneFrame, style: ChartStyle): Shape[] {
  if (half === 0) return []
  return [middle - half, middle + half].map((y) => ({
    kind: 'polyline',
    points: [
      [0, y],
      [frame.width, y],
    ],
    stroke: style.palette.hairline,
    width: 1,
  }))
}

interface Measured {
  at: number
  c: number
  band: PitBand | null
}

/** The stretches in which something was measured. */
function measuredRuns(pit: LanePit): Measured[][] {
  const runs: Measured[][] = []
  let open: Measured[] | undefined
  for (const [at, c] of withGaps(pit.line)) {
    if (c === null) {
      open = undefined
      continue
    }
    if (open === undefined) runs.push((open = []))
    open.push({ at, c, band: bandAt(pit, at) })
  }
  return runs
}

function clamp(share: number): number {
  return Math.max(-1, Math.min(1, share))
}
