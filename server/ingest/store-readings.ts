import type { Knex } from 'knex'
import { z } from 'zod'
import { numberArray } from '../db/number-array.ts'

/** A reading as it goes into the database. */
export interface ReadingRow {
  channelId: number
  /** Milliseconds since 1970 UTC. */
  atMs: number
  value: number
  receivedAtMs: number
}

/** A row that was not stored because its channel and time were there already. */
export interface Unstored {
  /** Its place among the rows given. */
  index: number
  /** The value that is there; undefined when it is the same. */
  otherValue: number | undefined
}

/**
 * Stores readings and counts each stored one into its minute, late ones too, in one statement: either both happen or
 * neither. Rows whose key is there already change nothing and are told back.
 *
 * @param rows at most some thousands; keys may repeat
 */
export async function storeReadings(db: Knex, rows: readonly ReadingRow[]): Promise<Unstored[]> {
  if (rows.length === 0) return []
  const { firsts, repeats } = separateRepeats(rows)
  const unstored = [...(await insert(db, rows, firsts)), ...repeats]
  return unstored.length === 0 ? [] : compare(db, rows, unstored)
}

/** The database would take the first of two equal keys in one statement, but could not tell of the second. */
function separateRepeats(rows: readonly ReadingRow[]): { firsts: number[]; repeats: number[] } {
  const seen = new Map<number, Set<number>>()
  const firsts: number[] = []
  const repeats: number[] = []
  for (const [index, { channelId, atMs }] of rows.entries()) {
    let times = seen.get(channelId)
    if (!times) seen.set(channelId, (times = new Set()))
    const before = times.size
    ;(times.add(atMs).size > before ? firsts : repeats).push(index)
  }
  return { firsts, repeats }
}

const insertStatement = `
  with sent as (
    select channel_id, to_timestamp(at_ms / 1000.0) as at, value, to_timestamp(received_ms / 1000.0) as received_at, place
    from unnest(?::int[], ?::float8[], ?::float8[], ?::float8[])
      with ordinality as s (channel_id, at_ms, value, received_ms, place)
  ), stored as (
    insert into readings (channel_id, at, value, received_at)
    select channel_id, at, value, received_at from sent order by channel_id, at
    on conflict do nothing
    returning channel_id, at, value
  ), rolled_up as (
    insert into readings_1m as m (channel_id, minute, low, high, total, count, last, last_at)
    select channel_id, date_trunc('minute', at, 'UTC'), min(value), max(value), sum(value), count(*),
      (array_agg(value order by at desc))[1], max(at)
    from stored group by 1, 2 order by 1, 2
    on conflict (channel_id, minute) do update set
      low = least(m.low, excluded.low),
      high = greatest(m.high, excluded.high),
      total = m.total + excluded.total,
      count = m.count + excluded.count,
      last = case when excluded.last_at > m.last_at then excluded.last else m.last end,
      last_at = greatest(m.last_at, excluded.last_at)
  )
  select place::int as place from sent
  where (select count(*) from stored) < ?
    and not exists (select 1 from stored where stored.channel_id = sent.channel_id and stored.at = sent.at)`

async function insert(db: Knex, rows: readonly ReadingRow[], firsts: readonly number[]): Promise<number[]> {
  const answer: unknown = await db.raw(insertStatement, [...columns(rows, firsts), firsts.length])
  return Places.parse(answer).rows.map(({ place }) => firsts[place - 1] ?? -1)
}

const compareStatement = `
  select s.place::int as place, r.value
  from unnest(?::int[], ?::float8[], ?::float8[], ?::float8[])
    with ordinality as s (channel_id, at_ms, value, received_ms, place)
  join readings r on r.channel_id = s.channel_id and r.at = to_timestamp(s.at_ms / 1000.0)
  where r.value <> s.value`

async function compare(
  db: Knex,
  rows: readonly ReadingRow[],
  unstored: readonly number[],
): Promise<Unstored[]> {
  const answer: unknown = await db.raw(compareStatement, columns(rows, unstored))
  const others = new Map(Others.parse(answer).rows.map(({ place, value }) => [place, value]))
  return unstored.map((index, at) => ({ index, otherValue: others.get(at + 1) }))
}

function columns(rows: readonly ReadingRow[], indices: readonly number[]): string[] {
  const channels: number[] = []
  const times: number[] = []
  const values: number[] = []
  const receipts: number[] = []
  for (const index of indices) {
    const row = rows[index]
    if (!row) continue
    channels.push(row.channelId)
    times.push(row.atMs)
    values.push(row.value)
    receipts.push(row.receivedAtMs)
  }
  return [channels, times, values, receipts].map(numberArray)
}

const Places = z.object({ rows: z.array(z.object({ place: z.number() })) })
const Others = z.object({ rows: z.array(z.object({ place: z.number(), value: z.number() })) })
