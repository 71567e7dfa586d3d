import type { Urgency } from '@/shared/domain/pit-state.ts'
import type { ChartStyle } from './chart-style.ts'
import type { Shape } from './shapes.ts'
import { textWidth } from './text-width.ts'

/** A piece of text in one size and colour. */
export interface Run {
  text: string
  size: number
  fill: string
  bold?: boolean
  /** The shape in front that goes with the colour: a triangle for amber, a square for red. */
  warning?: Urgency
}

/** Lines of runs with the room they take, px. */
export interface TextBlock {
  lines: readonly (readonly Run[])[]
  width: number
  height: number
}

const lineHeight = 1.16

/** Measures lines of runs. */
export function textBlock(lines: readonly (readonly Run[])[]): TextBlock {
  return {
    lines,
    width: Math.max(0, ...lines.map(lineWidth)),
    height: lines.reduce((sum, line) => sum + heightOf(line), 0),
  }
}

/** The block's shapes with its upper left corner at a point. */
export function blockShapes(block: TextBlock, x: number, y: number, style: ChartStyle): Shape[] {
  const shapes: Shape[] = []
  let top = y
  for (const line of block.lines) {
    const height = heightOf(line)
    const largest = Math.max(...line.map((run) => run.size))
    let left = x
    for (const run of line) {
      // Smaller runs stand on the same base line as the largest.
      const middle = top + height / 2 + (largest - run.size) * 0.34
      if (run.warning !== undefined) {
        shapes.push(warningShape(left, middle, run))
        left += warningWidth(run)
      }
      shapes.push({
        kind: 'text',
        x: left,
        y: middle,
        text: run.text,
        size: run.size,
        fill: run.fill,
        bold: run.bold ?? false,
        halo: style.palette.ground,
      })
      left += textWidth(run.text, run.size) + spaceAfter(run)
    }
    top += height
  }
  return shapes
}

function warningShape(x: number, middle: number, run: Run): Shape {
  const half = run.size * 0.36
  if (run.warning === 'now') {
    const side = half * 1.7
    return { kind: 'rect', x, y: middle - side / 2, width: side, height: side, fill: run.fill }
  }
  return {
    kind: 'polygon',
    points: [
      [x + half, middle - half],
      [x + half * 2, middle + half * 0.85],
      [x, middle + half * 0.85],
    ],
    fill: run.fill,
  }
}

function warningWidth(run: Run): number {
  return run.size * 0.95
}

function spaceAfter(run: Run): number {
  return run.size * 0.32
}

function heightOf(line: readonly Run[]): number {
  return Math.max(...line.map((run) => run.size)) * lineHeight
}

function lineWidth(line: readonly Run[]): number {
  return line.reduce((sum, run, i) => {
    const glyph = run.warning === undefined ? 0 : warningWidth(run)
    return sum + glyph + textWidth(run.text, run.size) + (i < line.length - 1 ? spaceAfter(run) : 0)
  }, 0)
}
