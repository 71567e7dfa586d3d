import type { Trace } from '@/shared/contract/reading.ts'
import type { ReadingTuple } from '@/shared/contract/live.ts'
import type { ChannelTrace } from './live-types.ts'

const second = 1000
/** Live readings are drawn into steps of this length, ms: three points a minute are more than a wall can show. */
const stepMs = 20 * second
/** How far back a line is kept, ms: the wall's twelve hours and a little. */
const keepMs = 12.5 * 3600 * second

/** A line as the server sent it. */
export function fromTrace({ channelId, at, c, low, high }: Trace): ChannelTrace {
  return { channelId, at, c, low, high }
}

/** A line without a point. */
export function emptyTrace(channelId: number): ChannelTrace {
  return { channelId, at: [], c: [], low: [], high: [] }
}

/**
 * The line with new readings at its end. A reading within the last point's step moves that point and widens its
 * extremes; one before it is passed over (it is in the line already or comes with the next load). Points older
 * than the wall's span are let go, so that a wall does not grow over weeks.
 */
export function extendTrace(trace: ChannelTrace, readings: readonly ReadingTuple[]): ChannelTrace {
  const at = [...trace.at]
  const c = [...trace.c]
  const low = [...trace.low]
  const high = [...trace.high]
  for (const [, time, value] of readings) {
    const last = at.length - 1
    const lastAt = at[last]
    if (lastAt !== undefined && time < lastAt) continue
    const sameStep = lastAt !== undefined && Math.floor(lastAt / stepMs) === Math.floor(time / stepMs)
    if (sameStep) {
      at[last] = time
      c[last] = value
      low[last] = Math.min(low[last] ?? value, value)
      high[last] = Math.max(high[last] ?? value, value)
    } else {
      at.push(time)
      c.push(value)
      low.push(value)
      high.push(value)
    }
  }
  const end = at.at(-1)
  if (end === undefined) return trace
  const firstKept = at.findIndex((time) => time >= end - keepMs)
  const from = firstKept < 0 ? 0 : firstKept
  return {
    channelId: trace.channelId,
    at: from === 0 ? at : at.slice(from),
    c: from === 0 ? c : c.slice(from),
    low: from === 0 ? low : low.slice(from),
    high: from === 0 ? high : high.slice(from),
  }
}

/** All lines with the readings of a frame. */
export function extendTraces(
  traces: ReadonlyMap<number, ChannelTrace>,
  readings: readonly ReadingTuple[],
): ReadonlyMap<number, ChannelTrace> {
  const byChannel = groupByChannel(readings)
  const next = new Map(traces)
  for (const [channelId, own] of byChannel) {
    next.set(channelId, extendTrace(next.get(channelId) ?? emptyTrace(channelId), own))
  }
  return next
}

function groupByChannel(readings: readonly ReadingTuple[]): Map<number, ReadingTuple[]> {
  const groups = new Map<number, ReadingTuple[]>()
  for (const reading of readings) {
    const group = groups.get(reading[0])
    if (group) group.push(reading)
    else groups.set(reading[0], [reading])
  }
  return groups
}
