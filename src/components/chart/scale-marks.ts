import type { ChartStyle } from './chart-style.ts'
import type { LaneData, Say } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { bandAt } from './pit-ribbon.ts'
import type { Shape } from './shapes.ts'
import { textWidth } from './text-width.ts'

/** On a large lane: round temperatures at the left with a hairline, and the pit's band beside its ribbon. */
export function scaleShapes(data: LaneData, frame: LaneFrame, style: ChartStyle, say: Say): Shape[] {
  if (!style.scale) return []
  const { palette, gap, small } = style
  const note = (text: string, left: number, y: number): Shape[] => [
    {
      kind: 'rect',
      x: left + gap,
      y: y - small * 0.6,
      width: textWidth(text, small) + gap,
      height: small * 1.2,
      fill: palette.ground,
    },
    { kind: 'text', x: left + gap * 1.5, y, text, size: small, fill: palette.quiet, bold: false },
  ]
  const levels = say.levels.flatMap((c): Shape[] => {
    const y = Math.round(frame.y(c)) + 0.5
    return [
      {
        kind: 'polyline',
        points: [
          [0, y],
          [frame.width, y],
        ],
        stroke: palette.hairline,
        width: 1,
      },
      ...note(say.temperature(c), 0, y),
    ]
  })
  const band = data.pit === null ? null : bandAt(data.pit, data.window.now)
  if (band === null || data.ended === true) return levels
  const text = say.words('chart.band', { span: say.temperatureSpan(band.bandLowC, band.bandHighC) })
  // Right of now the ribbon is empty: what the pit will do is not forecast.
  return [...levels, ...note(text, frame.x(data.window.now), frame.ribbon.y + frame.ribbon.height / 2)]
}
