import type { Knex } from 'knex'
import { z } from 'zod'
import type { ReadingTuple } from '#shared/contract/live.ts'
import { ensurePartitions } from '../db/partitions.ts'
import type { NewReading } from './decode.ts'
import type { Job } from './job.ts'
import { storeReadings } from './store-readings.ts'
import { storeRejections, type Rejection } from './store-rejections.ts'
import type { Batch } from './waiting-line.ts'

export interface Committed {
  /** What was new, by site, as it goes to the live rooms. */
  stored: Map<string, ReadingTuple[]>
}

/** Commits a batch: its readings, and what was refused of it with the reason. Notes the outcome in each job. */
export async function commitBatch(db: Knex, batch: Batch): Promise<Committed> {
  const rows: NewReading[] = []
  const refused: Rejection[] = []
  for (const { job, from, to } of batch.slices) {
    for (let index = from; index < to; index++) {
      const reading = job.readings[index]
      if (reading) rows.push(reading)
    }
    if (from === 0 && job.refused.length > 0) refused.push(...rejectionsOf(job))
  }

  const store = async (trx: Knex) => {
    const unstored = new Map<number, number | undefined>()
    for (const { index, otherValue } of await storeReadings(trx, rows)) unstored.set(index, otherValue)
    await storeRejections(trx, [...refused, ...conflictsAmong(batch, unstored)])
    return unstored
  }
  const unstored = await withPartitions(db, rows, () =>
    // A single statement is a transaction already; conflicts found later are told before anyone is acknowledged.
    refused.length > 0 ? db.transaction(store) : store(db),
  )
  return note(batch, unstored)
}

/** Only now, after the commit, the outcome is written down: a batch may be tried more than once. */
function note(batch: Batch, unstored: Unstored): Committed {
  const stored = new Map<string, ReadingTuple[]>()
  let at = 0
  for (const { job, from, to } of batch.slices) {
    const { outcome, sender } = job
    let ofSite = stored.get(sender.siteSlug)
    if (!ofSite) stored.set(sender.siteSlug, (ofSite = []))
    for (let index = from; index < to; index++, at++) {
      const reading = job.readings[index]
      if (!reading) continue
      if (unstored.size === 0 || !unstored.has(at)) {
        outcome.stored++
        ofSite.push([reading.channelId, reading.atMs, reading.celsius])
        continue
      }
      const otherValue = unstored.get(at)
      if (otherValue === undefined) outcome.duplicates++
      else outcome.rejected.push({ reason: 'conflict', detail: conflictText(reading, otherValue) })
    }
  }
  return { stored }
}

/** By place in the batch: undefined where the same value is there already, else the other value that is. */
type Unstored = ReadonlyMap<number, number | undefined>

function conflictsAmong(batch: Batch, unstored: Unstored): Rejection[] {
  if (unstored.size === 0) return []
  const conflicts: Rejection[] = []
  let at = 0
  for (const { job, from, to } of batch.slices) {
    for (let index = from; index < to; index++, at++) {
      const otherValue = unstored.get(at)
      if (otherValue !== undefined) conflicts.push(...conflictOf(job, index, otherValue))
    }
  }
  return conflicts
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

function conflictOf(job: Job, index: number, otherValue: number): Rejection[] {
  const reading = job.readings[index]
  if (!reading) return []
  const { channelId, atMs, value, celsius } = reading
  return [
    {
      ...headOf(job),
      reason: 'conflict',
      detail: conflictText(reading, otherValue),
      payload: JSON.stringify({ channelId, atMs, value, celsius }),
    },
  ]
}

function headOf(job: Job) {
  return { deviceId: job.sender.deviceId, receivedAtMs: job.receivedAtMs, topic: job.topic }
}

function conflictText({ atMs, value }: NewReading, otherValue: number): string {
  return `the reading of ${new Date(atMs).toISOString()} is ${otherValue} already, not ${value}`
}

const NoPartition = z.object({
  code: z.literal('23514'),
  message: z.string().regex(/no partition of relation/),
})

/** Weeks are made ahead by a job; should one lack all the same, readings do not wait for it. */
async function withPartitions<T>(db: Knex, rows: readonly NewReading[], store: () => Promise<T>): Promise<T> {
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
