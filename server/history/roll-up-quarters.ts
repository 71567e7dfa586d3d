import type { Knex } from 'knex'
import { z } from 'zod'
import { rollUpLock } from './roll-up-lock.ts'

export interface RolledUp {
  /** How many quarters of an hour, each of one channel, were counted anew. */
  quarters: number
  /** Whether some that are over are left: somebody stored for so long that the roll-up gave way. */
  left: boolean
}

const minuteMs = 60_000
const quarterMs = 15 * minuteMs
/** A quarter is rolled up once it has been over for this long, ms: what comes later than that is counted again. */
const graceMs = 2 * minuteMs
/** Ingest waits while one turn's quarters are counted: some milliseconds. */
const quartersATurn = 100
/** Ingest that begins while the roll-up waits for its lock waits with it: no longer than this, ms. */
const lockTimeoutMs = 100

/**
 * Counts the quarters of an hour that have new readings into `readings_15m`, from their minutes, and strikes them off
 * `readings_due`; each turn in a transaction of its own, so that it may end half-way, and be done twice or at once.
 * Quarters that are not over yet stay due; charts read their minutes instead.
 */
export async function rollUpQuarters(db: Knex, { nowMs }: { nowMs: number }): Promise<RolledUp> {
  const before = new Date(nowMs - graceMs - quarterMs).toISOString()
  let quarters = 0
  for (;;) {
    const counted = await turn(db, before)
    if (counted === 'given way') return { quarters, left: true }
    quarters += counted
    if (counted < quartersATurn) return { quarters, left: false }
  }
}

/** Whether a span (milliseconds since 1970 UTC, half-open) has quarters that are not rolled up. */
export async function isDue(db: Knex, fromMs: number, toMs: number): Promise<boolean> {
  const row: unknown = await db('readings_due')
    .where('quarter', '>=', new Date(fromMs))
    .where('quarter', '<', new Date(toMs))
    .first('quarter')
  return row !== undefined
}

/** The lock is a statement of its own: only the next one sees what those had stored who held it before. */
async function turn(db: Knex, before: string): Promise<number | 'given way'> {
  try {
    return await db.transaction(async (trx) => {
      await trx.raw(`set local lock_timeout = ${lockTimeoutMs}`)
      await trx.raw(`select pg_advisory_xact_lock(${rollUpLock})`)
      const answer: unknown = await trx.raw(countStatement, { before, most: quartersATurn })
      return Counted.parse(answer).rows[0].quarters
    })
  } catch (error) {
    if (LockTimeout.safeParse(error).success) return 'given way'
    throw error
  }
}

const countStatement = `
  with due as (
    -- By their place in the table, which nobody changes while the lock is held: quick however many are due.
    delete from readings_due
    where ctid = any (array(
      select ctid from readings_due where quarter < :before::timestamptz order by channel_id, quarter limit :most
    ))
    returning channel_id, quarter
  ), counted as (
    insert into readings_15m as q (channel_id, quarter, low, high, total, count, last, last_at)
    select due.channel_id, due.quarter, m.low, m.high, m.total, m.count, m.last, m.last_at
    from due cross join lateral (
      select min(low) as low, max(high) as high, sum(total) as total, sum(count) as count,
        (array_agg(last order by minute desc))[1] as last, max(last_at) as last_at
      from readings_1m
      where channel_id = due.channel_id and minute >= due.quarter and minute < due.quarter + interval '15 minutes'
      having count(*) > 0
    ) as m
    order by due.quarter, due.channel_id
    on conflict (channel_id, quarter) do update set
      low = excluded.low, high = excluded.high, total = excluded.total, count = excluded.count,
      last = excluded.last, last_at = excluded.last_at
  )
  select count(*)::int as quarters from due`

const Counted = z.object({ rows: z.tuple([z.object({ quarters: z.int() })]) })
/** `lock_not_available`. */
const LockTimeout = z.object({ code: z.literal('55P03') })
