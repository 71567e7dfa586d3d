import { existsSync, readFileSync } from 'node:fs'
import { rm } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { openDatabase } from '../../server/db/database.ts'
import { migrate } from '../../server/db/migrate.ts'
import { startPostgres } from '../../server/setup/postgres.ts'

export interface ScratchPostgres {
  /** A migrated database without a row of data, password included. */
  url: string
  /** Of the process whose children serve the connections. */
  pid: number
  /** Stops the server and removes all that it stored. */
  remove: () => Promise<void>
}

/**
 * A PostgreSQL for one benchmark, set up as the tests' own: safe as in earnest (fsync and synchronous commit stay on),
 * only roomier. It lies where the tests keep theirs, so that what a killed run leaves behind is cleared by the next.
 */
export async function startScratchPostgres(): Promise<ScratchPostgres> {
  const dataDir = join(tmpdir(), `coalhand-test-${process.pid}`)
  const server = await startPostgres({
    dataDir,
    log: () => undefined,
    settings: { shared_buffers: '512MB', max_wal_size: '4GB', max_connections: '200' },
  })
  const remove = async () => {
    await server.stop()
    if (existsSync(join(server.directory, 'postmaster.pid'))) return
    await rm(server.directory, { recursive: true, force: true })
    await rm(dataDir, { recursive: true, force: true })
  }
  const db = openDatabase(server.url, { max: 2 })
  try {
    await migrate(db)
  } catch (error) {
    await remove()
    throw error
  } finally {
    await db.destroy()
  }
  const pid = Number.parseInt(readFileSync(join(server.directory, 'postmaster.pid'), 'utf8'))
  return { url: server.url, pid, remove }
}
