import type { ReadingTuple } from '../shared/contract/live.ts'
import type { Trace } from '../shared/contract/reading.ts'
import type { ChannelTrace } from './live-types.ts'

/** How far back the lines reach: the wall shows twelve hours at most. */
export const traceSpanMs = 12 * 3_600_000
/** Cut off only once they are half an hour longer, so that not every frame copies everything. */
const slackMs = 30 * 60_000
/** One point a channel in this time: about the width of a pixel on the largest wall. */
const stepMs = 20_000

export interface TraceOptions {
  /** Silence longer than this is drawn as a gap, in milliseconds, by channel. */
  gapMs(channelId: number): number
  /** The present, in milliseconds since 1970 UTC. */
  now: number
}

type Traces = ReadonlyMap<number, ChannelTrace>

interface Draft {
  channelId: number
  at: number[]
  c: (number | null)[]
  low: (number | null)[]
  high: (number | null)[]
}

/** The lines as the server gives them. */
export function tracesFrom(traces: readonly Trace[]): Traces {
  return new Map(traces.map((trace) => [trace.channelId, trace]))
}

/**
 * The lines with new readings in them, in time order, thinned to one point in twenty seconds (with the extremes of
 * the step) and cut to twelve hours. Late readings go where they belong. Nothing in `traces` is touched.
 */
export function extendTraces(
  traces: Traces,
  readings: readonly ReadingTuple[],
  options: TraceOptions,
): Traces {
  if (readings.length === 0) return traces
  const next = new Map(traces)
  for (const [channelId, own] of byChannel(readings)) {
    const draft = copyOf(next.get(channelId) ?? emptyTrace(channelId))
    const gapMs = options.gapMs(channelId)
    let late = false
    for (const [, at, c] of own.toSorted((a, b) => a[1] - b[1])) {
      if (at >= (draft.at.at(-1) ?? -Infinity)) append(draft, at, c, gapMs)
      else {
        insert(draft, at, c)
        late = true
      }
    }
    next.set(channelId, cut(late ? withGaps(draft, gapMs) : draft, options.now))
  }
  return next
}

function byChannel(readings: readonly ReadingTuple[]): Map<number, ReadingTuple[]> {
  const groups = new Map<number, ReadingTuple[]>()
  for (const reading of readings) {
    const [id] = reading
    const group = groups.get(id)
    if (group === undefined) groups.set(id, [reading])
    else group.push(reading)
  }
  return groups
}

function emptyTrace(channelId: number): ChannelTrace {
  return { channelId, at: [], c: [], low: [], high: [] }
}

function copyOf(trace: ChannelTrace): Draft {
  return {
    channelId: trace.channelId,
    at: [...trace.at],
    c: [...trace.c],
    low: [...trace.low],
    high: [...trace.high],
  }
}

function append(draft: Draft, at: number, c: number, gapMs: number): void {
  const last = draft.at.length - 1
  const lastAt = draft.at[last]
  if (lastAt !== undefined && draft.c[last] !== null) {
    if (sameStep(lastAt, at)) {
      merge(draft, last, c)
      draft.c[last] = c
      return
    }
    if (at - lastAt > gapMs) put(draft, draft.at.length, lastAt + 1, null)
  }
  put(draft, draft.at.length, at, c)
}

function insert(draft: Draft, at: number, c: number): void {
  const index = firstAfter(draft.at, at)
  for (const near of [index - 1, index]) {
    const nearAt = draft.at[near]
    if (nearAt !== undefined && draft.c[near] !== null && sameStep(nearAt, at)) {
      merge(draft, near, c)
      return
    }
  }
  put(draft, index, at, c)
}

function merge(draft: Draft, index: number, c: number): void {
  draft.low[index] = Math.min(draft.low[index] ?? c, c)
  draft.high[index] = Math.max(draft.high[index] ?? c, c)
}

function put(draft: Draft, index: number, at: number, c: number | null): void {
  draft.at.splice(index, 0, at)
  for (const line of [draft.c, draft.low, draft.high]) line.splice(index, 0, c)
}

/** Draws the gaps anew: a late reading may have filled one, or stand alone in the middle of one. */
function withGaps(draft: Draft, gapMs: number): Draft {
  const next: Draft = { channelId: draft.channelId, at: [], c: [], low: [], high: [] }
  draft.at.forEach((at, i) => {
    const c = draft.c[i] ?? null
    if (c === null) return
    const lastAt = next.at.at(-1)
    if (lastAt !== undefined && at - lastAt > gapMs) put(next, next.at.length, lastAt + 1, null)
    next.at.push(at)
    next.c.push(c)
    next.low.push(draft.low[i] ?? c)
    next.high.push(draft.high[i] ?? c)
  })
  return next
}

function cut(draft: Draft, now: number): ChannelTrace {
  const first = draft.at[0]
  if (first === undefined || first >= now - traceSpanMs - slackMs) return draft
  const from = firstAfter(draft.at, now - traceSpanMs)
  return {
    channelId: draft.channelId,
    at: draft.at.slice(from),
    c: draft.c.slice(from),
    low: draft.low.slice(from),
    high: draft.high.slice(from),
  }
}

function sameStep(one: number, other: number): boolean {
  return Math.floor(one / stepMs) === Math.floor(other / stepMs)
}

/** Index of the first time after `at`; the length when there is none. */
function firstAfter(times: readonly number[], at: number): number {
  let low = 0
  let high = times.length
  while (low < high) {
    const middle = (low + high) >> 1
    if ((times[middle] ?? Infinity) <= at) low = middle + 1
    else high = middle
  }
  return low
}
