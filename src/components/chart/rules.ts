import type { ChartStyle } from './chart-style.ts'
import type { LanePiece, Say } from './lane-data.ts'
import type { Box, LaneFrame } from './lane-frame.ts'
import { overlaps } from './place-boxes.ts'
import type { Shape } from './shapes.ts'
import { textWidth } from './text-width.ts'

interface Rule {
  c: number
  label: string
}

interface Span {
  lowC: number
  highC: number
}

/** Temperatures closer than this share one rule: two would read as one thick line. */
const sameRuleC = 3

/**
 * The wrap and pull temperatures of a lane's pieces as fine rules, each broken by its own value like the height on
 * a contour line. Labels stand at the left, side by side where the rules are too close for one above the other.
 */
export function ruleShapes(
  pieces: readonly LanePiece[],
  frame: LaneFrame,
  style: ChartStyle,
  say: Say,
): { lines: Shape[]; labels: Shape[]; boxes: Box[] } {
  const lines: Shape[] = []
  const labels: Shape[] = []
  const boxes: Box[] = []
  for (const rule of rulesOf(pieces, say)) {
    const y = frame.y(rule.c)
    const box = style.flags ? labelBox(rule.label, y, boxes, { pieces, frame, style }) : null
    const parts =
      box === null
        ? [[0, frame.width]]
        : [
            [0, box.x],
            [box.x + box.width, frame.width],
          ]
    for (const [left = 0, right = 0] of parts) {
      lines.push({
        kind: 'polyline',
        points: [
          [left, y],
          [right, y],
        ],
        stroke: style.palette.mark,
        width: style.rule,
      })
    }
    if (box === null) continue
    boxes.push(box)
    labels.push({ kind: 'rect', ...box, fill: `${style.palette.ground}d0` })
    labels.push({
      kind: 'text',
      x: box.x + style.gap / 2,
      y,
      text: rule.label,
      size: style.small,
      fill: style.palette.quiet,
      bold: false,
      halo: style.palette.ground,
    })
  }
  return { lines, labels, boxes }
}

function rulesOf(pieces: readonly LanePiece[], say: Say): Rule[] {
  return [
    ...merged(pieces.map((piece) => piece.pullAtC)).map((span) => ruleOf(span, 'chart.rule.pull', say)),
    ...merged(pieces.map((piece) => piece.wrapAtC)).map((span) => ruleOf(span, 'chart.rule.wrap', say)),
  ]
}

function ruleOf({ lowC, highC }: Span, key: 'chart.rule.pull' | 'chart.rule.wrap', say: Say): Rule {
  const same = say.temperature(lowC) === say.temperature(highC)
  const at = same ? say.temperature(lowC) : say.temperatureSpan(lowC, highC)
  return { c: (lowC + highC) / 2, label: say.words(key, { at }) }
}

/** Temperatures, from the lowest up, with those that would lie on one another put together. */
function merged(temperatures: readonly number[]): Span[] {
  const spans: Span[] = []
  for (const c of temperatures.toSorted((a, b) => a - b)) {
    const last = spans.at(-1)
    if (last !== undefined && c - last.lowC < sameRuleC) last.highC = c
    else spans.push({ lowC: c, highC: c })
  }
  return spans
}

/** A place for the label on its rule left of the fans, clear of other labels and, if it can be, of every line. */
function labelBox(
  label: string,
  y: number,
  taken: readonly Box[],
  lane: { pieces: readonly LanePiece[]; frame: LaneFrame; style: ChartStyle },
): Box | null {
  const { gap, small } = lane.style
  const size = { width: textWidth(label, small) + gap, height: small * 1.2 }
  const places: Box[] = []
  for (let x = gap; x + size.width < lane.frame.width * 0.39; x += size.width / 8) {
    const box = { x, y: y - size.height / 2, ...size }
    if (!taken.some((other) => overlaps(box, other))) places.push(box)
  }
  return places.find((box) => !lane.pieces.some((piece) => runsThrough(piece, box, lane.frame))) ?? null
}

function runsThrough(piece: LanePiece, box: Box, frame: LaneFrame): boolean {
  return piece.line.some(([at, c]) => {
    if (c === null) return false
    const x = frame.x(at)
    const y = frame.y(c)
    return x > box.x - 4 && x < box.x + box.width + 4 && y > box.y && y < box.y + box.height
  })
}
