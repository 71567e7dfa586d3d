import type { Trace } from '#shared/contract/reading.ts'
import type { LinePart } from './cuts.ts'
import type { LinePoint } from './lines.ts'

/** Readings further apart than this, in ms, or than three steps, have a gap between them. */
const gapMs = 3 * 60 * 1000

/** Points as a chart's arrays, rounded to a hundredth of a degree, with a null in the middle of each gap. */
export function traceOf(channelId: number, points: readonly LinePoint[], stepMs: number): Trace {
  const trace: Trace = { channelId, at: [], c: [], low: [], high: [] }
  const longest = Math.max(gapMs, 3 * stepMs)
  let before: number | undefined
  for (const { atMs, celsius, low, high } of points) {
    if (before !== undefined && atMs - before > longest) {
      trace.at.push(Math.round((before + atMs) / 2))
      trace.c.push(null)
      trace.low.push(null)
      trace.high.push(null)
    }
    trace.at.push(atMs)
    trace.c.push(hundredths(celsius))
    trace.low.push(hundredths(low))
    trace.high.push(hundredths(high))
    before = atMs
  }
  return trace
}

/** Parts one after the other: where two overlap, the one that began later counts. */
export function inSequence(parts: readonly LinePart[]): LinePart[] {
  const sorted = [...parts].sort((a, b) => a.fromMs - b.fromMs)
  return sorted
    .map((part, index) => ({ ...part, toMs: Math.min(part.toMs, sorted[index + 1]?.fromMs ?? Infinity) }))
    .filter(({ fromMs, toMs }) => fromMs < toMs)
}

function hundredths(celsius: number): number {
  return Math.round(celsius * 100) / 100
}
