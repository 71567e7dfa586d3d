import type { Knex } from 'knex'
import { z } from 'zod'
import { numberArray } from '../../db/number-array.ts'
import type { Cut, Window } from './cuts.ts'

/** A step of a cut as it is stored, in the sensor's unit, but for the mean of a thermistor's. */
export interface StoredStep {
  /** Which cut. */
  place: number
  /** The middle between its first reading, minute or quarter and its last reading, ms since 1970 UTC. */
  atMs: number
  count: number
  /** Of a thermistor in °C without its offset: resistance is far from straight, and the mean of ohms means nothing. */
  mean: number
  low: number
  high: number
}

/**
 * The steps of windows of cuts. Quarters that are not rolled up yet are read from their minutes, by one snapshot of
 * what is due and what is counted, so that the answer is right however far behind the roll-up is.
 */
export async function readSteps(
  db: Knex,
  cuts: readonly Cut[],
  windows: readonly Window[],
  stepMs: number,
): Promise<StoredStep[]> {
  const read = async (source: Window['source'], statement: string) => {
    const own = windows.filter((window) => window.source === source)
    if (own.length === 0) return []
    const bindings = { step: `${stepMs} ms`, ...columnsOf(cuts, own), ...outerBounds(own) }
    return stepsOf(await db.raw(statement, bindings))
  }
  const found = await Promise.all([
    read('readings', fromReadings),
    read('minutes', stepMs === minuteMs ? eachMinute : fromMinutes),
    read('quarters', fromQuarters),
  ])
  return found.flat()
}

const minuteMs = 60_000

const asked = `
  unnest(:places::int[], :channels::int[], :froms::float8[], :tos::float8[], :as::float8[], :bs::float8[], :cs::float8[])
    as w (place, channel_id, from_ms, to_ms, a, b, c)`

/** Rows with their mean as a temperature where the sensor is a thermistor (its curve: src/shared/domain). */
const select = (start: string) => `
  select place, ${start} as start, last_at, low, high, count,
    case when a is null then mean when mean > 0 then 1 / nullif(a + b * ln(mean) + c * ln(mean) ^ 3, 0) - 273.15 end as mean`

/** A row a cut with a list for each column: a tenth of what it costs to take in a row a step. */
const listed = (first: string, last: string, steps: string) => `
  select place, array_agg((date_part('epoch', ${first}) + date_part('epoch', ${last})) * 500)::text as at_ms,
    array_agg(low)::text as low, array_agg(high)::text as high, array_agg(count)::text as count,
    array_agg(mean)::text as mean
  from (${steps}) as steps
  where mean is not null
  group by place`

const gather = (rows: string) =>
  listed(
    'first_at',
    'last_at',
    `select place, min(start) as first_at, max(last_at) as last_at, min(low) as low, max(high) as high,
       sum(count) as count, sum(mean * count) / sum(count) as mean
     from (${rows}) as r
     where mean is not null
     group by place, date_bin(:step::interval, start, '1970-01-01 00:00:00+00')`,
  )

const within = (column: string) => `
  channel_id = w.channel_id and ${column} >= to_timestamp(w.from_ms / 1000) and ${column} < to_timestamp(w.to_ms / 1000)`

const columns = 'low, high, total / count as mean, count, last_at'

const minutes = `
  ${select('minute')} from ${asked}
  cross join lateral (select minute, ${columns} from readings_1m where ${within('minute')}) as m`
const fromMinutes = gather(minutes)
/** A step a minute: as they are stored. */
const eachMinute = listed('start', 'last_at', minutes)

/** The outer bounds let the planner leave out the weeks that nobody asks for, before it looks at any of them. */
const fromReadings = gather(`
  ${select('at')} from ${asked}
  cross join lateral (
    select at, value as low, value as high, value as mean, 1 as count, at as last_at from readings
    where ${within('at')} and at >= :first::timestamptz and at < :end::timestamptz
  ) as m`)

const fromQuarters = gather(`
  ${select('quarter')} from ${asked}
  cross join lateral (
    select quarter, ${columns} from readings_15m as q where ${within('quarter')} and not exists (
      select from readings_due as d where d.channel_id = q.channel_id and d.quarter = q.quarter
    )
  ) as m
  union all
  ${select('quarter')} from ${asked}
  cross join lateral (select channel_id, quarter from readings_due where ${within('quarter')}) as d
  cross join lateral (
    select ${columns} from readings_1m
    where channel_id = d.channel_id and minute >= d.quarter and minute < d.quarter + interval '15 minutes'
  ) as m`)

const Columns = z.object({
  place: z.int(),
  at_ms: z.string(),
  low: z.string(),
  high: z.string(),
  count: z.string(),
  mean: z.string(),
})
const Rows = z.object({ rows: z.array(Columns) })

function stepsOf(answer: unknown): StoredStep[] {
  const steps: StoredStep[] = []
  for (const row of Rows.parse(answer).rows) {
    const [lows, highs] = [numbersOf(row.low), numbersOf(row.high)]
    const [counts, means] = [numbersOf(row.count), numbersOf(row.mean)]
    for (const [index, atMs] of numbersOf(row.at_ms).entries()) {
      steps.push({
        place: row.place,
        atMs,
        low: lows[index] ?? NaN,
        high: highs[index] ?? NaN,
        count: counts[index] ?? NaN,
        mean: means[index] ?? NaN,
      })
    }
  }
  return steps
}

/** Numbers of an array without nulls as PostgreSQL writes it. */
function numbersOf(array: string): number[] {
  return array.slice(1, -1).split(',').map(Number)
}

function columnsOf(cuts: readonly Cut[], windows: readonly Window[]): Record<string, string> {
  const curves = windows.map(({ place }) => {
    const sensor = cuts[place]?.sensor
    return sensor?.kind === 'thermistor' ? sensor.curve : undefined
  })
  return {
    places: numberArray(windows.map(({ place }) => place)),
    channels: numberArray(windows.map(({ place }) => cuts[place]?.channelId)),
    froms: numberArray(windows.map(({ fromMs }) => fromMs)),
    tos: numberArray(windows.map(({ toMs }) => toMs)),
    as: numberArray(curves.map((curve) => curve?.a)),
    bs: numberArray(curves.map((curve) => curve?.b)),
    cs: numberArray(curves.map((curve) => curve?.c)),
  }
}

function outerBounds(windows: readonly Window[]): Record<string, string> {
  const first = windows.reduce((least, { fromMs }) => Math.min(least, fromMs), Infinity)
  const end = windows.reduce((most, { toMs }) => Math.max(most, toMs), -Infinity)
  if (!(first < end)) return {}
  return { first: new Date(first).toISOString(), end: new Date(end).toISOString() }
}
