import type { LineSeriesOption } from 'echarts/charts'
import type { EChartsCoreOption } from 'echarts/core'
import type { ChartStyle } from './chart-style.ts'
import { envelopeShapes, firstAndLast, mostSingly } from './envelope.ts'
import { comingWrapShapes, eventShapes } from './event-marks.ts'
import { fanShapes } from './fan.ts'
import type { LaneData, LanePiece, Say } from './lane-data.ts'
import type { LaneFrame } from './lane-frame.ts'
import { laneFrame } from './lane-frame.ts'
import type { PlacedLabel } from './label-places.ts'
import { foldedLabels, inStages, singleLabels } from './lane-labels.ts'
import { withGaps } from './piece-lines.ts'
import { ribbonShapes } from './pit-ribbon.ts'
import { restBarShapes } from './rest-bars.ts'
import { ruleShapes } from './rules.ts'
import { scaleShapes } from './scale-marks.ts'
import { shapeSeries } from './shapes.ts'
import { staleShapes } from './stale-hatch.ts'
import { clockLineShapes } from './clock-lines.ts'

/** A lane as ECharts draws it. */
export interface LaneDrawing {
  option: EChartsCoreOption
  frame: LaneFrame
  /** Whether the pieces are shown as one body. */
  folded: boolean
  labels: readonly PlacedLabel[]
}

/**
 * A cooker's lane: data, look, words and size in, an ECharts option out. Nothing here touches a canvas.
 * `ticks` are the moments at which the shared clock has a tick; `midnights` those at which the day turns.
 */
export function laneOption(input: {
  data: LaneData
  size: { width: number; height: number }
  style: ChartStyle
  say: Say
  ticks: readonly { at: number; midnight: boolean }[]
}): LaneDrawing {
  const { data, style, say } = input
  const frame = laneFrame(data, input.size, style)
  const { cooking } = inStages(data.pieces)
  const single =
    data.ended === true ? [] : cooking.length > mostSingly ? null : singleLabels(data, frame, style, say)
  const folded = single === null
  const labels = single ?? foldedLabels(data, frame, style, say)
  const drawn = folded ? [] : cooking
  const fanned = folded ? endsOf(cooking) : cooking
  // On its own page a piece keeps its rules when it is done.
  const rules = ruleShapes(style.scale ? data.pieces : cooking, frame, style, say)
  const paint = (z: number) => ({ z, fontFamily: style.fontFamily })

  return {
    frame,
    folded,
    labels,
    option: {
      animation: false,
      ...plotAxes(data, frame),
      series: [
        shapeSeries('clock', clockLineShapes(data, input.ticks, frame, style), paint(1)),
        shapeSeries(
          'fans',
          fanned.flatMap((piece) => fanShapes(piece, frame, style)),
          paint(2),
        ),
        shapeSeries('rules', [...rules.lines, ...scaleShapes(data, frame, style, say)], paint(3)),
        shapeSeries('envelope', folded ? envelopeShapes(cooking, data.window, frame, style) : [], paint(4)),
        ...data.pieces
          .filter((piece) => !folded || !cooking.includes(piece))
          .map((piece) => pieceSeries(piece, drawn.includes(piece), style)),
        shapeSeries('ribbon', data.pit === null ? [] : ribbonShapes(data.pit, frame, style), paint(5)),
        shapeSeries('bars', restBarShapes(data, labels, frame, style), paint(6)),
        shapeSeries('stale', staleShapes(data, frame, style), paint(7)),
        shapeSeries(
          'marks',
          [
            ...drawn.flatMap((piece) => comingWrapShapes(piece, frame, style)),
            ...eventShapes(data.marks, folded ? [] : data.pieces, frame, style),
          ],
          paint(8),
        ),
        shapeSeries('labels', [...rules.labels, ...labels.flatMap((label) => label.shapes)], paint(9)),
      ],
    },
  }
}

function plotAxes(data: LaneData, frame: LaneFrame): EChartsCoreOption {
  const { plot, height, topC } = frame
  return {
    grid: { left: 0, right: 0, top: plot.y, bottom: height - plot.y - plot.height, containLabel: false },
    xAxis: { type: 'value', min: data.window.from, max: data.window.to, show: false },
    yAxis: { type: 'value', min: 0, max: topC, show: false },
  }
}

function pieceSeries(piece: LanePiece, cooking: boolean, style: ChartStyle): LineSeriesOption {
  return {
    id: `piece-${piece.id}`,
    type: 'line',
    silent: true,
    showSymbol: false,
    connectNulls: false,
    sampling: 'lttb',
    z: 5,
    data: withGaps(piece.line).map(([at, c]) => [at, c ?? '-']),
    lineStyle: {
      color: cooking ? style.palette.text : style.palette.quiet,
      width: cooking ? style.coreLine : style.coreLine * 0.6,
      cap: 'round',
      join: 'round',
    },
  }
}

function endsOf(cooking: readonly LanePiece[]): LanePiece[] {
  const due = firstAndLast(cooking)
  if (due === null) return []
  return due.first === due.last ? [due.first] : [due.first, due.last]
}
