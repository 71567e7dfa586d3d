import { execFile } from 'node:child_process'
import { rm, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { performance } from 'node:perf_hooks'
import { promisify } from 'node:util'
import type { Knex } from 'knex'
import { storeReadings, type ReadingRow } from '../../../server/ingest/store-readings.ts'
import { findPostgres } from '../../../server/setup/find-postgres.mjs'

const channels = 120
/** Of nobody. */
const firstChannel = 1_000_000
const rowsPerStatement = 1000

/** Readings of 120 channels in time order, ten a second each, the last one now. */
export function* readingsInOrder(count: number, nowMs: number): Generator<ReadingRow> {
  const steps = Math.ceil(count / channels)
  for (let index = 0; index < count; index++) {
    const step = Math.floor(index / channels)
    const atMs = nowMs - (steps - step) * 100
    const value = 90 + ((step * 7 + index) % 1000) / 100
    yield { channelId: firstChannel + (index % channels), atMs, value, receivedAtMs: atMs + 20 }
  }
}

/** Rows a second of PostgreSQL's own COPY into `readings`, through its client psql from a file. */
export async function copyRate(
  db: Knex,
  options: { url: string; folder: string; count: number; nowMs: number },
): Promise<number> {
  await empty(db)
  const file = join(options.folder, 'readings.copy')
  const lines: string[] = []
  for (const { channelId, atMs, value, receivedAtMs } of readingsInOrder(options.count, options.nowMs)) {
    lines.push(
      `${channelId}\t${new Date(atMs).toISOString()}\t${value}\t${new Date(receivedAtMs).toISOString()}\n`,
    )
  }
  await writeFile(file, lines.join(''), { mode: 0o600 })
  const psql = join(findPostgres()?.directory ?? '', 'psql')
  const { hostname, port, username, password, pathname } = new URL(options.url)
  const begun = performance.now()
  await promisify(execFile)(
    psql,
    ['--quiet', '--no-psqlrc', '-c', `\\copy readings (channel_id, at, value, received_at) from '${file}'`],
    {
      env: {
        PGHOST: hostname,
        PGPORT: port,
        PGUSER: decodeURIComponent(username),
        PGPASSWORD: decodeURIComponent(password),
        PGDATABASE: pathname.slice(1),
      },
    },
  )
  const seconds = (performance.now() - begun) / 1000
  await rm(file)
  await expectRows(db, options.count)
  return options.count / seconds
}

/** Rows a second of the ingest's own statement, roll-ups and all, 1,000 rows at a time, one after another. */
export async function insertRate(db: Knex, options: { count: number; nowMs: number }): Promise<number> {
  await empty(db)
  const rows = [...readingsInOrder(options.count, options.nowMs)]
  const begun = performance.now()
  for (let from = 0; from < rows.length; from += rowsPerStatement) {
    await storeReadings(db, rows.slice(from, from + rowsPerStatement))
  }
  const seconds = (performance.now() - begun) / 1000
  await expectRows(db, options.count)
  return options.count / seconds
}

/** Starts each measurement from the same point: no rows and no dead ones. */
export async function empty(db: Knex): Promise<void> {
  await db.raw('truncate readings, readings_1m, readings_15m, readings_due')
}

export async function expectRows(db: Knex, expected: number): Promise<void> {
  const found = Number((await db('readings').count())[0]?.['count'])
  if (found !== expected) throw new Error(`${found} rows are stored, not ${expected}.`)
}
