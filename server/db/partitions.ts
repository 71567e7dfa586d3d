import type { Knex } from 'knex'
import { z } from 'zod'

/** A weekly partition of `readings`; moments in milliseconds since 1970 UTC, half-open. */
export interface Partition {
  name: string
  fromMs: number
  toMs: number
}

const weekMs = 7 * 24 * 3600 * 1000
/** Monday 1970-01-05 00:00 UTC: weeks of the readings' partitions start there. */
const firstMonday = 4 * 24 * 3600 * 1000
/** How long one that makes or takes away partitions waits for another, ms. */
const lockTimeoutMs = 5000

/**
 * Creates the weekly partitions of `readings` that cover a span (milliseconds since 1970 UTC, both ends included).
 * Those that exist are left alone, so several processes may call it.
 *
 * A partition is made beside `readings` and attached, since `create table … partition of` would wait for whoever
 * reads the whole table, such as a backup, and hold up all ingest behind it (PostgreSQL, ALTER TABLE, ATTACH
 * PARTITION: a SHARE UPDATE EXCLUSIVE lock on the parent, which goes with reads and inserts).
 */
export async function ensurePartitions(db: Knex, fromMs: number, toMs: number): Promise<void> {
  const wanted: Partition[] = []
  for (let start = weekStart(fromMs); start <= toMs; start += weekMs) wanted.push(partitionOf(start))
  if ((await missing(db, wanted)).length === 0) return
  // Serialised by a lock of its own: two processes that create one partition at once would fail, not wait.
  await db.transaction(async (trx) => {
    await trx.raw(`set local lock_timeout = ${lockTimeoutMs}`)
    await trx.raw(`select pg_advisory_xact_lock(hashtext('readings partitions'))`)
    for (const { name, fromMs: from, toMs: to } of await missing(trx, wanted)) {
      const bounds = `from ('${new Date(from).toISOString()}') to ('${new Date(to).toISOString()}')`
      await trx.raw(`create table ${name} (like readings including all)`)
      await trx.raw(`alter table readings attach partition ${name} for values ${bounds}`)
    }
  })
}

/** The span of partitions that live traffic needs: what devices may still send, and two weeks ahead. */
export function livePartitionSpan(nowMs: number): { fromMs: number; toMs: number } {
  return { fromMs: nowMs - 3 * weekMs, toMs: nowMs + 2 * weekMs }
}

/** The weekly partitions that `readings` has, oldest first. `detaching` are those whose detaching was broken off. */
export async function listPartitions(db: Knex): Promise<(Partition & { detaching: boolean })[]> {
  const found: unknown = await db.raw(`
    select c.relname as name, i.inhdetachpending as detaching
    from pg_inherits i join pg_class c on c.oid = i.inhrelid
    where i.inhparent = 'readings'::regclass order by 1`)
  return Attached.parse(found).rows.flatMap(({ name, detaching }) => {
    const [, year, month, day] = /^readings_(\d{4})(\d\d)(\d\d)$/.exec(name) ?? []
    // Whoever attached a partition of another name looks after it.
    if (year === undefined) return []
    return [{ ...partitionOf(Date.parse(`${year}-${month}-${day}T00:00:00Z`)), detaching }]
  })
}

const Attached = z.object({ rows: z.array(z.object({ name: z.string(), detaching: z.boolean() })) })

async function missing(db: Knex, wanted: readonly Partition[]): Promise<Partition[]> {
  const there = new Set((await listPartitions(db)).map(({ name }) => name))
  return wanted.filter(({ name }) => !there.has(name))
}

function partitionOf(startMs: number): Partition {
  const day = new Date(startMs).toISOString().slice(0, 10)
  return { name: `readings_${day.replaceAll('-', '')}`, fromMs: startMs, toMs: startMs + weekMs }
}

function weekStart(ms: number): number {
  return Math.floor((ms - firstMonday) / weekMs) * weekMs + firstMonday
}
