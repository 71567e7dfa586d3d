import type { Knex } from 'knex'
import { DateTime } from 'luxon'
import pg from 'pg'
import { z } from 'zod'
import { listPartitions, type Partition } from '../db/partitions.ts'
import { isDue } from './roll-up-quarters.ts'

export interface RetentionOptions {
  /** The same database: to detach takes a connection of its own, since it cannot be done in a transaction. */
  databaseUrl: string
  nowMs: number
  /** Readings older than this are given up, whole weeks at a time; 0 keeps them for ever. */
  retentionMonths: number
}

export interface Dropped {
  /** Names of the partitions that are gone. */
  dropped: string[]
  /** Those past the retention that stay until the next time: somebody reads them, or their roll-up is behind. */
  left: string[]
}

/** How long to wait for those who use a partition, ms; they and ingest go on meanwhile. */
const lockTimeoutMs = 5000

/**
 * Drops the weeks of readings that are past the retention; their roll-ups stay. A week is given up first (from then on
 * charts read its minutes), then detached, then dropped. It may end anywhere: the next time goes on from there.
 * Detaching concurrently holds up nobody who reads or stores (PostgreSQL, ALTER TABLE, DETACH PARTITION).
 */
export async function dropOldPartitions(db: Knex, options: RetentionOptions): Promise<Dropped> {
  const { databaseUrl, nowMs, retentionMonths } = options
  const dropped: string[] = []
  const left: string[] = []
  const old = retentionMonths > 0 ? await giveUp(db, startOfKept(nowMs, retentionMonths)) : []
  left.push(...old.filter(({ givenUp }) => !givenUp).map(({ name }) => name))
  const undropped = await givenUpAndThere(db)
  if (undropped.length === 0) return { dropped, left }
  const client = new pg.Client({ connectionString: databaseUrl, application_name: 'coalhand retention' })
  await client.connect()
  try {
    await client.query(`set lock_timeout = ${lockTimeoutMs}`)
    // Two processes at once would find each other's half-done work.
    if (!(await isAlone(client))) return { dropped, left: [...left, ...undropped] }
    for (const name of await givenUpAndThere(db)) {
      if (await dropOne(db, client, name)) dropped.push(name)
      else left.push(name)
    }
    return { dropped, left }
  } finally {
    await client.end()
  }
}

/** From when on readings are kept, in ms since 1970 UTC: calendar months, since that is what people count in. */
export function startOfKept(nowMs: number, months: number): number {
  return DateTime.fromMillis(nowMs, { zone: 'utc' }).minus({ months }).toMillis()
}

/** Before this moment, in ms since 1970 UTC, readings as sent are no more, only their roll-ups; undefined: never. */
export async function givenUpBefore(db: Knex): Promise<number | undefined> {
  const row: unknown = await db('readings_given_up').max('to_at as at').first()
  return z.object({ at: z.date().nullable() }).parse(row).at?.getTime()
}

/** Notes the weeks that end before a moment, but none whose minutes are not rolled up yet. */
async function giveUp(db: Knex, beforeMs: number): Promise<(Partition & { givenUp: boolean })[]> {
  const old = (await listPartitions(db)).filter(({ toMs }) => toMs <= beforeMs)
  const noted: (Partition & { givenUp: boolean })[] = []
  for (const partition of old) {
    const givenUp = !(await isDue(db, partition.fromMs, partition.toMs))
    if (givenUp) {
      const { name, fromMs, toMs } = partition
      await db('readings_given_up')
        .insert({ partition: name, from_at: new Date(fromMs), to_at: new Date(toMs), dropped: false })
        .onConflict('partition')
        .merge(['dropped'])
    }
    noted.push({ ...partition, givenUp })
  }
  return noted
}

const Names = z.array(z.object({ partition: z.string() }))

async function givenUpAndThere(db: Knex): Promise<string[]> {
  const rows: unknown = await db('readings_given_up')
    .where({ dropped: false })
    .orderBy('from_at')
    .select('partition')
  return Names.parse(rows).map(({ partition }) => partition)
}

async function isAlone(client: pg.Client): Promise<boolean> {
  const answer = await client.query(`select pg_try_advisory_lock(hashtext('readings retention')) as alone`)
  return z.tuple([z.object({ alone: z.boolean() })]).parse(answer.rows)[0].alone
}

/** @returns whether it is gone; not while somebody uses it */
async function dropOne(db: Knex, client: pg.Client, name: string): Promise<boolean> {
  const table = pg.escapeIdentifier(name)
  try {
    const attached = (await listPartitions(db)).find((partition) => partition.name === name)
    if (attached) {
      // PostgreSQL finishes what was broken off between its own two steps.
      const how = attached.detaching ? 'finalize' : 'concurrently'
      await client.query(`alter table readings detach partition ${table} ${how}`)
    }
    await client.query(`drop table if exists ${table}`)
  } catch (error) {
    if (isBusy(error)) return false
    throw error
  }
  await db('readings_given_up').where({ partition: name }).update({ dropped: true })
  return true
}

/** `lock_not_available`; `object_not_in_prerequisite_state`: another partition's detaching has to be finished first. */
function isBusy(error: unknown): boolean {
  return z.object({ code: z.enum(['55P03', '55000']) }).safeParse(error).success
}
