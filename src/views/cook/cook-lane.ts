import type { BandSpan, LaneData, LanePiece, Line } from '@/components/chart/lane-data.ts'
import type { Phase } from '@/shared/domain/cooking.ts'
import type { CookEvent } from '@/shared/contract/event.ts'
import type { PitBand } from '@/shared/domain/pit-state.ts'
import type { Trace } from '@/shared/contract/reading.ts'
import type { ChannelTrace } from '@/stores/live-types.ts'
import { valueAt } from '@/components/chart/piece-lines.ts'

const hour = 3_600_000
/** A fresh piece's lane is not drawn narrower than this. */
const leastSpan = 4 * hour

/** A line as fetched, carried on by what came live since. */
export function carriedOn(fetched: Trace | null | undefined, live: ChannelTrace | undefined): Line {
  const points: [number, number | null][] = []
  if (fetched) fetched.at.forEach((at, i) => points.push([at, fetched.c[i] ?? null]))
  const last = points.at(-1)?.[0] ?? -Infinity
  if (live) {
    live.at.forEach((at, i) => {
      if (at > last) points.push([at, live.c[i] ?? null])
    })
  }
  return points
}

/**
 * The bands of the pits a piece stood in, one after the other, from what is logged. A cooker that is not there any
 * more has no band that could be drawn; bands are those the cookers have now.
 */
export function bandSpans(
  events: readonly CookEvent[],
  cookers: ReadonlyMap<number, PitBand> | undefined,
): BandSpan[] {
  return events.flatMap(({ fact, happenedAt, correctedById }): BandSpan[] => {
    if (correctedById !== null) return []
    const cookerId = fact.kind === 'moved' ? fact.toCookerId : 'cookerId' in fact ? fact.cookerId : undefined
    if (cookerId === undefined) return []
    return [{ from: Date.parse(happenedAt), band: cookers?.get(cookerId) ?? null }]
  })
}

/**
 * The span of one piece's lane: its whole cook, from when it went on to the late end of its forecast or its service,
 * or, once it is done, to its end.
 */
export function cookWindow(cook: {
  now: number
  onAt: number
  doneAt: number | null
  late: number | null
  servesAt: number | null
}): LaneData['window'] {
  const end = cook.doneAt ?? Math.max(cook.now, cook.late ?? 0, cook.servesAt ?? 0)
  const now = Math.min(cook.now, cook.doneAt ?? cook.now)
  const length = Math.max(leastSpan, end - cook.onAt)
  // Room for the flag behind the late end.
  return {
    now,
    from: cook.onAt - 0.02 * length,
    to: cook.onAt + length * (cook.doneAt === null ? 1.18 : 1.03),
  }
}

/** What the cursor reads at a moment. Temperatures in °C. */
export interface CursorReading {
  at: number
  coreC: number | null
  pitC: number | null
  /** In what part of the cook it was; null where that was not said. */
  phase: Phase | null
  /** Of a moment to come: 80 % lie between these. */
  forecast: { c: number; lowC: number; highC: number } | null
}

/** Reads a lane at a moment: what was measured, or what is forecast. */
export function readCook(
  at: number,
  lane: { data: LaneData; piece: LanePiece },
  said: readonly { at: number; phase: Phase }[],
): CursorReading {
  const { data, piece } = lane
  const past = at <= data.window.now
  return {
    at,
    coreC: past ? valueAt(piece.line, at) : null,
    pitC: past && data.pit !== null ? valueAt(data.pit.line, at) : null,
    phase: past ? (said.findLast((each) => each.at <= at)?.phase ?? null) : null,
    forecast: past ? null : fanAt(piece, at),
  }
}

function fanAt(piece: LanePiece, at: number): CursorReading['forecast'] {
  const right = piece.fan.findIndex((slice) => slice.at >= at)
  const a = piece.fan[right - 1]
  const b = piece.fan[right]
  if (a === undefined || b === undefined) return null
  const share = (at - a.at) / (b.at - a.at)
  const mix = (from: number, to: number) => Math.min(piece.pullAtC, from + (to - from) * share)
  return { c: mix(a.p50, b.p50), lowC: mix(a.p10, b.p10), highC: mix(a.p90, b.p90) }
}

/** A row of the readings table. */
export interface ReadingRow {
  at: number
  coreC: number | null
  pitC: number | null
}

/** The last hours at quarter hours, newest first; what was not measured is null. */
export function readingRows(lane: { data: LaneData; piece: LanePiece }, hours: number): ReadingRow[] {
  const step = hour / 4
  const rows: ReadingRow[] = []
  const newest = Math.floor(lane.data.window.now / step) * step
  for (let at = newest; at > newest - hours * hour; at -= step) {
    const coreC = valueAt(lane.piece.line, at)
    const pitC = lane.data.pit === null ? null : valueAt(lane.data.pit.line, at)
    if (coreC !== null || pitC !== null) rows.push({ at, coreC, pitC })
  }
  return rows
}
