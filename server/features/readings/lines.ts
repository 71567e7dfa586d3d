import type { Knex } from 'knex'
import { z } from 'zod'
import { celsiusOf, type Sensor, type SensorSpan } from '#shared/domain/sensor.ts'
import { numberArray } from '../../db/number-array.ts'

/** A part of a line: one channel over a half-open span, in milliseconds since 1970 UTC. */
export interface LinePart {
  channelId: number
  fromMs: number
  toMs: number
}

/** A step of a line: the mean of its readings and their extremes, in °C. */
export interface LinePoint {
  atMs: number
  celsius: number
  low: number
  high: number
}

/** From here on lines are drawn from the one-minute roll-up, in ms. */
export const rolledUpFromMs = 3600 * 1000
const minuteMs = 60 * 1000

/** How wide a step is, so that a span has at most so many: whole minutes where the roll-up is read; in ms. */
export function stepFor(spanMs: number, points: number): number {
  // A span may begin in the middle of a step: one more step than the division says.
  const exact = Math.max(1, spanMs / Math.max(1, points - 1))
  return spanMs > rolledUpFromMs ? Math.ceil(exact / minuteMs) * minuteMs : Math.ceil(exact)
}

/**
 * The points of parts of lines, in °C by the sensor of each time, in one query. Steps are cut at the same moments for
 * every part, so that lines of one chart stand below each other.
 *
 * @returns for each part its points, from the oldest on
 */
export async function readLines(
  db: Knex,
  parts: readonly LinePart[],
  options: {
    stepMs: number
    rolledUp: boolean
    sensorsOf: (channelIds: readonly number[]) => Promise<Map<number, SensorSpan[]>>
  },
): Promise<LinePoint[][]> {
  const sensors = await options.sensorsOf([...new Set(parts.map(({ channelId }) => channelId))])
  const pieces = parts.flatMap((part, partIndex) =>
    cutAtSensors(part, sensors.get(part.channelId) ?? []).map((cut) => ({ ...cut, partIndex })),
  )
  const lines: LinePoint[][] = parts.map(() => [])
  if (pieces.length === 0) return lines
  const found: unknown = await db.raw(options.rolledUp ? fromRollUp : fromReadings, {
    step: options.stepMs,
    channels: numberArray(pieces.map(({ channelId }) => channelId)),
    froms: numberArray(pieces.map(({ fromMs }) => fromMs)),
    tos: numberArray(pieces.map(({ toMs }) => toMs)),
  })
  for (const row of Rows.parse(found).rows) {
    const piece = pieces[row.place - 1]
    const point = piece && pointOf(row, piece.sensor)
    if (piece && point) lines[piece.partIndex]?.push(point)
  }
  return lines
}

const fromRollUp = `
  select s.place::int as place, step.*
  from unnest(:channels::int[], :froms::float8[], :tos::float8[]) with ordinality as s (channel_id, from_ms, to_ms, place)
  cross join lateral (
    select (extract(epoch from min(minute))::float8 + extract(epoch from max(last_at))::float8) * 500 as at_ms,
      sum(total) / sum(count) as mean, min(low) as low, max(high) as high
    from readings_1m
    where channel_id = s.channel_id
      and minute >= to_timestamp(s.from_ms / 1000.0) and minute < to_timestamp(s.to_ms / 1000.0)
    group by floor(extract(epoch from minute)::float8 * 1000 / :step::float8)
  ) as step
  order by place, at_ms`

const fromReadings = `
  select s.place::int as place, step.*
  from unnest(:channels::int[], :froms::float8[], :tos::float8[]) with ordinality as s (channel_id, from_ms, to_ms, place)
  cross join lateral (
    select (extract(epoch from min(at))::float8 + extract(epoch from max(at))::float8) * 500 as at_ms,
      avg(value) as mean, min(value) as low, max(value) as high
    from readings
    where channel_id = s.channel_id
      and at >= to_timestamp(s.from_ms / 1000.0) and at < to_timestamp(s.to_ms / 1000.0)
    group by floor(extract(epoch from at)::float8 * 1000 / :step::float8)
  ) as step
  order by place, at_ms`

const Row = z.object({
  place: z.int(),
  at_ms: z.number(),
  mean: z.number(),
  low: z.number(),
  high: z.number(),
})
const Rows = z.object({ rows: z.array(Row) })

/** A part is read in the pieces during which one sensor hung on its channel, oldest first. */
function cutAtSensors(part: LinePart, spans: readonly SensorSpan[]): (LinePart & { sensor: Sensor })[] {
  return spans
    .map(({ fromMs, toMs, sensor }) => ({
      channelId: part.channelId,
      fromMs: Math.max(part.fromMs, fromMs),
      toMs: Math.min(part.toMs, toMs),
      sensor,
    }))
    .filter(({ fromMs, toMs }) => fromMs < toMs)
    .sort((a, b) => a.fromMs - b.fromMs)
}

/** The curve of a thermistor falls: its lowest value is the highest temperature. */
function pointOf(row: z.infer<typeof Row>, sensor: Sensor): LinePoint | undefined {
  const celsius = celsiusOf(sensor, row.mean)
  const ends = [celsiusOf(sensor, row.low), celsiusOf(sensor, row.high)]
  const [one, other] = ends
  if (celsius === undefined || one === undefined || other === undefined) return undefined
  return { atMs: Math.round(row.at_ms), celsius, low: Math.min(one, other), high: Math.max(one, other) }
}
