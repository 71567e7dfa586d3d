import type { ChartStyle } from './chart-style.ts'
import type { LaneData } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import type { Shape } from './shapes.ts'

/**
 * The lines of the shared clock through a lane: hairlines at the ticks, a stronger one where the day turns, the
 * service hour as a double line, and now. Drawn the full height of each lane, they run through all of them.
 */
export function clockLineShapes(
  data: LaneData,
  ticks: readonly { at: number; midnight: boolean }[],
  frame: LaneFrame,
  style: ChartStyle,
): Shape[] {
  const { palette, rule } = style
  const line = (x: number, stroke: string, width: number): Shape => ({
    kind: 'polyline',
    points: [
      [x, 0],
      [x, frame.height],
    ],
    stroke,
    width,
  })
  const apart = Math.max(2, rule * 2)
  return [
    ...ticks.map((tick) =>
      line(Math.round(frame.x(tick.at)) + 0.5, tick.midnight ? palette.mark : palette.hairline, 1),
    ),
    ...data.services
      .map((at) => frame.x(at))
      .flatMap((x) => [line(x - apart, palette.text, rule), line(x + apart, palette.text, rule)]),
    ...(data.ended === true ? [] : [line(frame.x(data.window.now), palette.text, rule * 2)]),
  ]
}
