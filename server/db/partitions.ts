import type { Knex } from 'knex'

const weekMs = 7 * 24 * 3600 * 1000
/** Monday 1970-01-05 00:00 UTC: weeks of the readings' partitions start there. */
const firstMonday = 4 * 24 * 3600 * 1000

/**
 * Creates the weekly partitions of `readings` that cover a span (milliseconds since 1970 UTC, both ends included).
 * Those that exist are left alone, so several processes may call it.
 */
export async function ensurePartitions(db: Knex, fromMs: number, toMs: number): Promise<void> {
  for (let start = weekStart(fromMs); start <= toMs; start += weekMs) {
    const from = new Date(start).toISOString()
    const to = new Date(start + weekMs).toISOString()
    const name = `readings_${from.slice(0, 10).replaceAll('-', '')}`
    // Serialised by a lock of its own: two processes that create one partition at once would fail, not wait.
    await db.transaction(async (trx) => {
      await trx.raw(`select pg_advisory_xact_lock(hashtext('readings partitions'))`)
      await trx.raw(
        `create table if not exists ${name} partition of readings for values from ('${from}') to ('${to}')`,
      )
    })
  }
}

/** The span of partitions that live traffic needs: what devices may still send, and two weeks ahead. */
export function livePartitionSpan(nowMs: number): { fromMs: number; toMs: number } {
  return { fromMs: nowMs - 3 * weekMs, toMs: nowMs + 2 * weekMs }
}

function weekStart(ms: number): number {
  return Math.floor((ms - firstMonday) / weekMs) * weekMs + firstMonday
}
