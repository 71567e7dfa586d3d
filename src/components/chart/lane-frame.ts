import type { ChartStyle } from './chart-style.ts'
import type { LaneData } from './lane-data.ts'

/** A box in px, from its upper left corner. */
export interface Box {
  x: number
  y: number
  width: number
  height: number
}

/** A lane's geometry: where its parts lie and how time and temperature become px. */
export interface LaneFrame {
  width: number
  height: number
  /** Where the pieces' lines run. */
  plot: Box
  /** The pit's ribbon under it. */
  ribbon: Box
  /** The highest temperature of the scale, °C; the lowest is 0. */
  topC: number
  x(at: number): number
  y(c: number): number
}

/** How far above the highest pull temperature the scale goes on, K. */
const headroomC = 8
/** A lane without pieces is scaled as for a usual brisket pull, 203 °F: common practice. */
const usualPullC = 95

/** Lays a lane of this size out. */
export function laneFrame(
  data: LaneData,
  size: { width: number; height: number },
  style: ChartStyle,
): LaneFrame {
  const { width, height } = size
  const { from, to } = data.window
  const ribbon = { x: 0, y: height - style.ribbon, width, height: style.ribbon }
  const pulls = data.pieces.map((piece) => piece.pullAtC)
  const topC = (pulls.length > 0 ? Math.max(...pulls) : usualPullC) + headroomC
  // The pull rule's label must not be cut off at the top of a low lane.
  const room = ribbon.y - style.gap / 2
  const top = Math.max(style.gap / 2, style.small * 0.62 - (room * headroomC) / topC)
  const plot = { x: 0, y: top, width, height: Math.max(10, room - top) }
  return {
    width,
    height,
    plot,
    ribbon,
    topC,
    x: (at) => ((at - from) / (to - from)) * width,
    y: (c) => plot.y + plot.height * (1 - Math.min(1.02, Math.max(0, c / topC))),
  }
}
