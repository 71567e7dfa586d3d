import type { ChartStyle } from './chart-style.ts'
import type { FanSlice, LanePiece } from './lane-data.ts'
import type { Box, LaneFrame } from './lane-frame.ts'
import type { Shape, XY } from './shapes.ts'

/**
 * The forecast of a piece as a fan: the 80 % band light, the middle 50 % denser, its median a thin broken line, and
 * on the pull rule a bar from the early to the late end of the pull. It starts at the newest reading, so that line
 * and fan are one stroke, and ends at the pull's late end.
 */
export function fanShapes(piece: LanePiece, frame: LaneFrame, style: ChartStyle): Shape[] {
  const slices = joinedSlices(piece)
  if (slices.length < 2) return []
  const { palette } = style
  const at = (slice: FanSlice, key: 'p10' | 'p25' | 'p50' | 'p75' | 'p90'): XY => [
    frame.x(slice.at),
    frame.y(Math.min(slice[key], piece.pullAtC)),
  ]
  const band = (low: 'p10' | 'p25', high: 'p75' | 'p90'): XY[] => [
    ...slices.map((slice) => at(slice, high)),
    ...slices.toReversed().map((slice) => at(slice, low)),
  ]
  return [
    { kind: 'polygon', points: band('p10', 'p90'), fill: palette.fanOuter },
    { kind: 'polygon', points: band('p25', 'p75'), fill: palette.fanInner },
    {
      kind: 'polyline',
      points: untilReached(slices, piece.pullAtC).map((slice) => at(slice, 'p50')),
      stroke: palette.text,
      width: Math.max(1, style.coreLine / 2),
      dash: [style.coreLine * 2.5, style.coreLine * 2],
    },
    ...reachBar(piece, frame, style),
  ]
}

/** The upper and lower edge of a fan's 80 % band by column, px; NaN where there is no fan. */
export interface FanEdges {
  upper: Float64Array
  lower: Float64Array
}

const columnPx = 4

/** A fan's edges, worked out once so that many places can be tried quickly. */
export function fanEdges(piece: LanePiece, frame: LaneFrame): FanEdges {
  const columns = Math.ceil(frame.width / columnPx) + 1
  const upper = new Float64Array(columns).fill(Number.NaN)
  const lower = new Float64Array(columns).fill(Number.NaN)
  const slices = joinedSlices(piece)
  for (let i = 1; i < slices.length; i++) {
    const a = slices[i - 1]
    const b = slices[i]
    if (a === undefined || b === undefined) continue
    const [left, right] = [frame.x(a.at), frame.x(b.at)]
    for (
      let column = Math.max(0, Math.ceil(left / columnPx));
      column * columnPx <= right && column < columns;
      column++
    ) {
      const share = (column * columnPx - left) / Math.max(1e-9, right - left)
      upper[column] = frame.y(Math.min(piece.pullAtC, a.p90 + (b.p90 - a.p90) * share))
      lower[column] = frame.y(Math.min(piece.pullAtC, a.p10 + (b.p10 - a.p10) * share))
    }
  }
  return { upper, lower }
}

/** How much of a box a fan covers, 0 to 1: labels are laid where this is small. */
export function fanCover({ upper, lower }: FanEdges, box: Box): number {
  const tries = 6
  let covered = 0
  for (let i = 0; i < tries; i++) {
    const column = Math.round((box.x + ((i + 0.5) / tries) * box.width) / columnPx)
    const shared =
      Math.min(lower[column] ?? Number.NaN, box.y + box.height) - Math.max(upper[column] ?? Number.NaN, box.y)
    // Even a sliver of fan behind a text disturbs it.
    if (shared > -1) covered += Math.max(0.25, shared / box.height) / tries
  }
  return covered
}

/** The fan from the newest reading on: slices that lie before it are left out, it becomes the first. */
function joinedSlices(piece: LanePiece): FanSlice[] {
  const { latest } = piece
  if (latest === null || piece.silentSince !== null) return [...piece.fan]
  const { at, c } = latest
  return [
    { at, p10: c, p25: c, p50: c, p75: c, p90: c },
    ...piece.fan.filter((slice) => slice.at > at + 60_000),
  ]
}

/** The median's course, cut where it crosses the pull temperature. */
function untilReached(slices: readonly FanSlice[], pullAtC: number): FanSlice[] {
  const beyond = slices.findIndex((slice) => slice.p50 >= pullAtC)
  return slices.slice(0, beyond < 0 ? slices.length : beyond + 1)
}

function reachBar(piece: LanePiece, frame: LaneFrame, style: ChartStyle): Shape[] {
  if (piece.pull === null) return []
  const { palette } = style
  const y = frame.y(piece.pullAtC)
  const x = frame.x(piece.pull.p50)
  const half = style.mark
  return [
    {
      kind: 'polyline',
      points: [
        [frame.x(piece.pull.p10), y],
        [frame.x(piece.pull.p90), y],
      ],
      stroke: palette.text,
      width: style.coreLine,
    },
    {
      kind: 'polygon',
      points: [
        [x, y - half * 1.3],
        [x + half * 1.1, y + half * 0.8],
        [x - half * 1.1, y + half * 0.8],
      ],
      fill: palette.ground,
      stroke: palette.text,
      width: style.coreLine / 2,
    },
  ]
}
