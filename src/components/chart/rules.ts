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

/** Temperatures closer than this share one rule: two would read as one thick line. */
const sameRuleC = 1.5

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
  const rules: Rule[] = []
  const add = (c: number, key: 'chart.rule.pull' | 'chart.rule.wrap') => {
    const label = say.words(key, { at: say.temperature(c) })
    const near = rules.some((rule) => Math.abs(rule.c - c) < sameRuleC)
    if (!near) rules.push({ c, label })
  }
  for (const piece of pieces) add(piece.pullAtC, 'chart.rule.pull')
  for (const piece of pieces) add(piece.wrapAtC, 'chart.rule.wrap')
  return rules
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
  for (let x = gap; x + size.width < lane.frame.width * 0.36; x += size.width / 3) {
    const box = { x, y: y - size.height / 2, ...size }
    if (!taken.some((other) => overlaps(box, other))) places.push(box)
  }
  return (
    places.find((box) => !lane.pieces.some((piece) => runsThrough(piece, box, lane.frame))) ??
    places[0] ??
    null
  )
}

function runsThrough(piece: LanePiece, box: Box, frame: LaneFrame): boolean {
  return piece.line.some(([at, c]) => {
    if (c === null) return false
    const x = frame.x(at)
    const y = frame.y(c)
    return x > box.x - 4 && x < box.x + box.width + 4 && y > box.y && y < box.y + box.height
  })
}
