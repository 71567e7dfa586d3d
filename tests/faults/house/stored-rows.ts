import type { Knex } from 'knex'
import { z } from 'zod'
import { numberArray } from '../../../server/db/number-array.ts'
import type { BoxPlan } from '../devices/plan.ts'
import type { KnownDevice } from './devices.ts'

/** What boxes have sent: their plans, whose devices they are, and samples a channel. */
export interface Sent {
  plans: readonly BoxPlan[]
  devices: readonly KnownDevice[]
  samples: readonly number[]
}

export interface Comparison {
  expected: number
  stored: number
  /** Sent and not there. */
  missing: number
  /** There and not sent, or with another value. */
  foreign: number
  /** Minutes whose roll-up is not what their readings give. */
  wrongMinutes: number
  /** Rows of other devices' channels. */
  elsewhere: number
  rejected: number
  /** Rows that were committed later than a newer reading of the same channel; readings that came a minute or more after
   * their time stand in a line of their own, behind the live ones. */
  outOfOrder: number
}

const expectedRows = `
  select ch.channel_id, to_timestamp((ch.start_ms + s.sample * ch.period_ms) / 1000.0) as at,
    60::float8 + ((s.sample * 7 + ch.number * 13) % 1024)::float8 / 16 as value
  from unnest(?::int[], ?::float8[], ?::float8[], ?::int[], ?::int[])
    as ch (channel_id, start_ms, period_ms, samples, number)
  cross join lateral generate_series(0, ch.samples - 1) as s (sample)`

/** Holds every row in the database against every row that was sent, and the roll-ups against the rows. */
export async function compareRows(db: Knex, sent: readonly Sent[]): Promise<Comparison> {
  const columns = columnsOf(sent)
  const [channels = '{}'] = columns
  const [rows] = Rows.parse(
    await db.raw(
      `with expected as (${expectedRows})
      select count(e.at)::int as expected, count(r.at)::int as stored,
        count(*) filter (where r.at is null)::int as missing,
        count(*) filter (where e.at is null or r.value <> e.value)::int as foreign
      from expected e full join (select * from readings where channel_id = any(?::int[])) r
        on r.channel_id = e.channel_id and r.at = e.at`,
      [...columns, channels],
    ),
  ).rows
  const [rest] = Rest.parse(
    await db.raw(
      `
      with should as (
        select channel_id, date_trunc('minute', at, 'UTC') as minute, min(value) as low, max(value) as high,
          count(*) as count, sum(value) as total, (array_agg(value order by at desc))[1] as last, max(at) as last_at
        from readings group by 1, 2)
      select
        (select count(*)::int from should s full join readings_1m m using (channel_id, minute)
          where m.low is distinct from s.low or m.high is distinct from s.high or m.count is distinct from s.count
            or m.last is distinct from s.last or m.last_at is distinct from s.last_at
            or m.total is distinct from s.total) as wrong_minutes,
        (select count(*)::int from readings where channel_id <> all(?::int[])) as elsewhere,
        (select coalesce(sum(count), 0)::int from rejection_counts) as rejected,
        (select count(*)::int from (
          -- A later commit has a higher transaction number: one insert is in flight at a time.
          select xmin::text::bigint < max(xmin::text::bigint) over (partition by channel_id, received_at > at + interval '1 minute' order by at
            rows between unbounded preceding and 1 preceding) as late
          from readings) as o where late) as out_of_order`,
      [channels],
    ),
  ).rows
  return {
    ...rows,
    wrongMinutes: rest.wrong_minutes,
    elsewhere: rest.elsewhere,
    rejected: rest.rejected,
    outOfOrder: rest.out_of_order,
  }
}

function columnsOf(sent: readonly Sent[]): string[] {
  const rows = sent.flatMap(({ plans, devices, samples }) =>
    devices.flatMap(({ channelIds }, index) =>
      channelIds.map((channelId, at) => {
        const { startMs = 0, periodMs = 0 } = plans[index] ?? {}
        return [channelId, startMs, periodMs, samples[index] ?? 0, at + 1]
      }),
    ),
  )
  return [0, 1, 2, 3, 4].map((column) => numberArray(rows.map((row) => row[column])))
}

const Rows = z.object({
  rows: z.tuple([z.object({ expected: z.int(), stored: z.int(), missing: z.int(), foreign: z.int() })]),
})
const Rest = z.object({
  rows: z.tuple([
    z.object({ wrong_minutes: z.int(), elsewhere: z.int(), rejected: z.int(), out_of_order: z.int() }),
  ]),
})
