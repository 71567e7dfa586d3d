import type { Line, LinePoint } from './lane-data.ts'

const minute = 60_000
/** A line is never broken for less than this. */
const leastGapMs = 3 * minute

/**
 * A line with its gaps made visible: where readings are missing for more than four of their usual steps (and at
 * least three minutes) a null is put between, so that no stroke pretends to know what was not measured.
 */
export function withGaps(line: Line): LinePoint[] {
  const longest = Math.max(leastGapMs, 4 * usualStep(line))
  const points: LinePoint[] = []
  let before: number | undefined
  for (const point of line) {
    if (before !== undefined && point[0] - before > longest) points.push([(point[0] + before) / 2, null])
    points.push(point)
    if (point[1] !== null) before = point[0]
  }
  return points
}

/** A line's value at a moment, straight between its neighbours; null in a gap and beyond its ends. */
export function valueAt(line: Line, at: number): number | null {
  let low = 0
  let high = line.length - 1
  if (high < 0) return null
  while (low < high) {
    const middle = (low + high) >> 1
    if ((line[middle]?.[0] ?? Infinity) < at) low = middle + 1
    else high = middle
  }
  const right = line[low]
  if (right === undefined) return null
  if (right[0] === at) return right[1]
  const left = line[low - 1]
  if (left === undefined || right[0] < at) return null
  if (left[1] === null || right[1] === null) return null
  return left[1] + ((right[1] - left[1]) * (at - left[0])) / (right[0] - left[0])
}

/** The part of a line from one moment to another, ends included. */
export function between(line: Line, from: number, to: number): LinePoint[] {
  return line.filter(([at]) => at >= from && at <= to)
}

function usualStep(line: Line): number {
  const stepsMs: number[] = []
  for (let i = 1; i < line.length; i++) stepsMs.push((line[i]?.[0] ?? 0) - (line[i - 1]?.[0] ?? 0))
  stepsMs.sort((a, b) => a - b)
  return stepsMs[stepsMs.length >> 1] ?? 0
}
