import { existsSync } from 'node:fs'
import { rm } from 'node:fs/promises'
import { join } from 'node:path'
import pg from 'pg'
import type { TestProject } from 'vitest/node'
import { migrateToLatest } from '../../server/db/migrate.ts'
import { startPostgres } from '../../server/setup/postgres.ts'
import { template, urlOfDatabase } from './postgres.ts'
import { clearEarlierRuns, runFolder } from './run-folders.ts'

const prefix = 'coalhand-test-'

/**
 * One PostgreSQL for the whole run, in a temporary folder of this process: the first project that needs it
 * starts it, the others join, the last to finish stops it. Safe as in earnest (fsync stays on); only roomier.
 */
export default async function setup(project: TestProject): Promise<() => Promise<void>> {
  await clearEarlierRuns(prefix)
  const dataDir = runFolder(prefix)
  const server = await startPostgres({
    dataDir,
    log: () => undefined,
    settings: { shared_buffers: '512MB', max_wal_size: '4GB', max_connections: '200' },
  })
  try {
    await makeTemplate(server.url)
  } catch (error) {
    await server.stop()
    throw error
  }
  project.provide('postgresUrl', server.url)
  return async () => {
    await server.stop()
    if (existsSync(join(server.directory, 'postmaster.pid'))) return
    await rm(server.directory, { recursive: true, force: true })
    await rm(dataDir, { recursive: true, force: true })
  }
}

/** Migrated once; named last, so that a template that exists is complete. */
async function makeTemplate(url: string): Promise<void> {
  const client = new pg.Client({ connectionString: url })
  await client.connect()
  try {
    const found = await client.query('select from pg_database where datname = $1', [template])
    if (found.rowCount !== 0) return
    const unfinished = `${template}_unfinished`
    await client.query(`create database ${unfinished}`)
    await migrateToLatest(urlOfDatabase(url, unfinished))
    await client.query(`alter database ${unfinished} rename to ${template}`)
  } finally {
    await client.end()
  }
}
