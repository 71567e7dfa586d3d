import type { CookEvent, CookFacts, CookReadings } from '#shared/forecast/types.ts'
import type { CookRecord } from './cook-record.ts'
import { pitSetCourse } from './pit-set-course.ts'

/** A line of one or more channels: ms since 1970 UTC and corrected °C, in time order. */
export interface Series {
  at: Float64Array
  c: Float64Array
}

/** What the model is asked about. */
export interface AssembledCook {
  /** The moment it stands at, seconds since the piece went on. */
  atS: number
  facts: CookFacts
  readings: CookReadings
  events: CookEvent[]
}

const minuteMs = 60_000

/**
 * Puts a piece's own line and its pits' onto one row a minute since it went on, and its log into the model's words,
 * as far as both go up to a moment. A minute in which neither probe reported has no row.
 * @param until ms since 1970 UTC, included
 */
export function assembleCook(
  record: CookRecord,
  lines: { core: readonly Series[]; pit: readonly Series[] },
  until: number,
): AssembledCook {
  const minutes = Math.max(0, Math.floor((until - record.onAt) / minuteMs)) + 1
  const core = byMinute(lines.core, record.onAt, until, minutes)
  const pit = byMinute(lines.pit, record.onAt, until, minutes)
  const rows = Array.from({ length: minutes }, (_, minute) => minute).filter(
    (minute) => core.count[minute] !== 0 || pit.count[minute] !== 0,
  )
  const mean = (line: MinuteLine, minute: number) => (line.sum[minute] ?? 0) / (line.count[minute] ?? 0)
  const latest = (minute: number) => Math.max(core.last[minute] ?? 0, pit.last[minute] ?? 0)
  const [start, ...changes] = pitSetCourse(record.stretches, record.pitSets, until)
  return {
    atS: (until - record.onAt) / 1000,
    facts: {
      id: String(record.pieceId),
      recipe: record.recipe,
      cured: record.cured,
      rawKg: record.rawKg,
      cookerKind: record.cookerKind,
      // A piece on a cooker has a course: it begins where the piece went on.
      pitSetC: start?.pitSetC ?? Number.NaN,
      wrapAtC: record.wrapAtC,
      wrapMethod: record.wrapMethod,
      pullAtC: record.pullAtC,
    },
    readings: {
      elapsedS: Float64Array.from(rows, (minute) => (latest(minute) - record.onAt) / 1000),
      coreC: Float64Array.from(rows, (minute) => mean(core, minute)),
      pitC: Float64Array.from(rows, (minute) => mean(pit, minute)),
    },
    events: [
      ...record.wraps
        .filter((wrap) => wrap.at <= until)
        .map((wrap) => ({
          elapsedS: (wrap.at - record.onAt) / 1000,
          kind: 'wrap' as const,
          method: wrap.method,
        })),
      ...changes.map((step) => ({
        elapsedS: (step.at - record.onAt) / 1000,
        kind: 'pit_set' as const,
        pitSetC: step.pitSetC,
      })),
    ].sort((a, b) => a.elapsedS - b.elapsedS),
  }
}

interface MinuteLine {
  sum: Float64Array
  count: Uint16Array
  /** The last moment of the minute that was reported. */
  last: Float64Array
}

function byMinute(lines: readonly Series[], onAt: number, until: number, minutes: number): MinuteLine {
  const line = {
    sum: new Float64Array(minutes),
    count: new Uint16Array(minutes),
    last: new Float64Array(minutes),
  }
  for (const { at, c } of lines) {
    for (const [index, moment] of at.entries()) {
      const value = c[index] ?? Number.NaN
      if (moment < onAt || moment > until || Number.isNaN(value)) continue
      const minute = Math.floor((moment - onAt) / minuteMs)
      line.sum[minute] = (line.sum[minute] ?? 0) + value
      line.count[minute] = (line.count[minute] ?? 0) + 1
      line.last[minute] = Math.max(line.last[minute] ?? 0, moment)
    }
  }
  return line
}
