import type { Knex } from 'knex'
import { z } from 'zod'
import type { ReadingTuple } from '#shared/contract/live.ts'
import { ensurePartitions } from '../db/partitions.ts'
import type { Job } from './job.ts'
import { storeReadings, type ReadingRow } from './store-readings.ts'
import { storeRejections, type Rejection } from './store-rejections.ts'
import type { Batch } from './waiting-line.ts'

export interface Committed {
  /** What was new, by site, as it goes to the live rooms. */
  stored: Map<string, ReadingTuple[]>
}

/** A reading of the batch and where it came from. */
interface Placed {
  job: Job
  index: number
}

/** Commits a batch: its readings, and what was refused of it with the reason. Notes the outcome in each job. */
export async function commitBatch(db: Knex, batch: Batch): Promise<Committed> {
  const rows: ReadingRow[] = []
  const places: Placed[] = []
  const rejections: Rejection[] = []
  for (const { job, from, to } of batch.slices) {
    for (let index = from; index < to; index++) {
      const reading = job.readings[index]
      if (!reading) continue
      rows.push({ ...reading, receivedAtMs: job.receivedAtMs })
      places.push({ job, index })
    }
    if (from === 0) rejections.push(...rejectionsOf(job))
  }

  const store = async (trx: Knex) => {
    const unstored = await storeReadings(trx, rows)
    const conflicts = new Map<number, number>()
    for (const { index, otherValue } of unstored) {
      if (otherValue !== undefined) conflicts.set(index, otherValue)
    }
    for (const [index, otherValue] of conflicts) {
      const place = places[index]
      if (place) rejections.push(conflictOf(place, otherValue))
    }
    await storeRejections(trx, rejections)
    return { unstored: new Set(unstored.map(({ index }) => index)), conflicts }
  }
  const result = await withPartitions(db, rows, () =>
    // A single statement is a transaction already; conflicts found later are told before anyone is acknowledged.
    rejections.length > 0 ? db.transaction(store) : store(db),
  )
  return note(places, result)
}

/** Only now, after the commit, the outcome is written down: a batch may be tried more than once. */
function note(
  places: readonly Placed[],
  { unstored, conflicts }: { unstored: ReadonlySet<number>; conflicts: ReadonlyMap<number, number> },
): Committed {
  const stored = new Map<string, ReadingTuple[]>()
  for (const [at, { job, index }] of places.entries()) {
    const reading = job.readings[index]
    if (!reading) continue
    const otherValue = conflicts.get(at)
    if (otherValue !== undefined) {
      job.outcome.rejected.push({ reason: 'conflict', detail: conflictText(job, index, otherValue) })
    } else if (unstored.has(at)) {
      job.outcome.duplicates++
    } else {
      job.outcome.stored++
      let ofSite = stored.get(job.sender.siteSlug)
      if (!ofSite) stored.set(job.sender.siteSlug, (ofSite = []))
      ofSite.push([reading.channelId, reading.atMs, reading.celsius])
    }
  }
  return { stored }
}

/** What of a message was refused, one row a reason. */
function rejectionsOf(job: Job): Rejection[] {
  const byReason = new Map<string, Rejection & { others: number }>()
  for (const { reason, detail, record } of job.refused) {
    const same = byReason.get(reason)
    if (same) same.others++
    else byReason.set(reason, { ...headOf(job), reason, detail, payload: record, others: 0 })
  }
  return [...byReason.values()].map(({ others, detail, ...rest }) => ({
    ...rest,
    detail: others > 0 ? `${detail} (and ${others} more of its kind in this message)` : detail,
  }))
}

function conflictOf({ job, index }: Placed, otherValue: number): Rejection {
  return {
    ...headOf(job),
    reason: 'conflict',
    detail: conflictText(job, index, otherValue),
    payload: JSON.stringify(job.readings[index]),
  }
}

function headOf(job: Job) {
  return { deviceId: job.sender.deviceId, receivedAtMs: job.receivedAtMs, topic: job.topic }
}

function conflictText(job: Job, index: number, otherValue: number): string {
  const { atMs = 0, value = 0 } = job.readings[index] ?? {}
  return `the reading of ${new Date(atMs).toISOString()} is ${otherValue} already, not ${value}`
}

const NoPartition = z.object({
  code: z.literal('23514'),
  message: z.string().regex(/no partition of relation/),
})

/** Weeks are made ahead by a job; should one lack all the same, readings do not wait for it. */
async function withPartitions<T>(db: Knex, rows: readonly ReadingRow[], store: () => Promise<T>): Promise<T> {
  try {
    return await store()
  } catch (error) {
    if (!NoPartition.safeParse(error).success) throw error
    const times = rows.map(({ atMs }) => atMs)
    const bound = (pick: (a: number, b: number) => number) => times.reduce((a, b) => pick(a, b))
    await ensurePartitions(db, bound(Math.min), bound(Math.max))
    return store()
  }
}
