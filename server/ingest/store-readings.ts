import type { Knex } from 'knex'
import { z } from 'zod'
import { rollUpLock } from '../history/roll-up-lock.ts'
import { doubleArray, intArray, timeArray } from './binary-array.ts'

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
 * Stores readings, counts each stored one into its minute, late ones too, and notes the quarters of an hour that are to
 * be rolled up anew, in one statement: either all happen or nothing. Rows whose key is there already change nothing and are told back.
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
  const byChannel = new Map<number, SeenTimes>()
  const firsts: number[] = []
  const repeats: number[] = []
  for (let index = 0; index < rows.length; index++) {
    const row = rows[index]
    if (row) (isFirst(byChannel, row) ? firsts : repeats).push(index)
  }
  return { firsts, repeats }
}

/** Times of one channel. As long as they rise, the newest alone tells a repeat. */
interface SeenTimes {
  newestMs: number
  all: number[]
  /** Made of `all` once a time is not newer than those before it. */
  set: Set<number> | undefined
}

function isFirst(byChannel: Map<number, SeenTimes>, { channelId, atMs }: ReadingRow): boolean {
  const seen = byChannel.get(channelId)
  if (!seen) {
    byChannel.set(channelId, { newestMs: atMs, all: [atMs], set: undefined })
    return true
  }
  if (atMs > seen.newestMs) {
    seen.newestMs = atMs
    if (seen.set) seen.set.add(atMs)
    else seen.all.push(atMs)
    return true
  }
  seen.set ??= new Set(seen.all)
  if (seen.set.has(atMs)) return false
  seen.set.add(atMs)
  return true
}

const insertStatement = `
  with held as materialized (
    select pg_advisory_xact_lock_shared(${rollUpLock})
  ), sent as (
    -- No row is touched before the lock is held.
    select channel_id, at, value, received_at, place
    from held cross join unnest(?::int[], ?::timestamptz[], ?::float8[], ?::timestamptz[])
      with ordinality as s (channel_id, at, value, received_at, place)
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
    returning channel_id, minute
  ), noted as (
    insert into readings_due (channel_id, quarter)
    -- In the order of the minutes, so that two batches never wait for each other.
    select channel_id, date_bin('15 minutes', minute, '2000-01-01 00:00:00+00') from rolled_up
    on conflict do nothing
  )
  select place::int as place from sent
  where (select count(*) from stored) < ?
    and not exists (select 1 from stored where stored.channel_id = sent.channel_id and stored.at = sent.at)`

async function insert(db: Knex, rows: readonly ReadingRow[], firsts: readonly number[]): Promise<number[]> {
  const sent = firsts.length === rows.length ? rows : pick(rows, firsts)
  const answer: unknown = await db.raw(insertStatement, [...columns(sent), sent.length])
  return Places.parse(answer).rows.map(({ place }) => firsts[place - 1] ?? -1)
}

const compareStatement = `
  select s.place::int as place, r.value
  from unnest(?::int[], ?::timestamptz[], ?::float8[], ?::timestamptz[])
    with ordinality as s (channel_id, at, value, received_at, place)
  join readings r on r.channel_id = s.channel_id and r.at = s.at
  where r.value <> s.value`

async function compare(
  db: Knex,
  rows: readonly ReadingRow[],
  unstored: readonly number[],
): Promise<Unstored[]> {
  const answer: unknown = await db.raw(compareStatement, columns(pick(rows, unstored)))
  const others = new Map(Others.parse(answer).rows.map(({ place, value }) => [place, value]))
  return unstored.map((index, at) => ({ index, otherValue: others.get(at + 1) }))
}

function pick(rows: readonly ReadingRow[], indices: readonly number[]): ReadingRow[] {
  return indices.flatMap((index) => rows[index] ?? [])
}

function columns(rows: readonly ReadingRow[]): Buffer[] {
  return [
    intArray(rows.length, (index) => rows[index]?.channelId ?? 0),
    timeArray(rows.length, (index) => rows[index]?.atMs ?? 0),
    doubleArray(rows.length, (index) => rows[index]?.value ?? 0),
    timeArray(rows.length, (index) => rows[index]?.receivedAtMs ?? 0),
  ]
}

const Places = z.object({ rows: z.array(z.object({ place: z.number() })) })
const Others = z.object({ rows: z.array(z.object({ place: z.number(), value: z.number() })) })
