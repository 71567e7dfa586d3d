import { Logger, runMigrations } from 'graphile-worker'
import pg from 'pg'

/**
 * Brings the tables of the job queue to the form that its package wants: they are the package's, in a schema of its
 * own. Safe to call from several processes, and quick when there is nothing to do.
 */
export async function migrateQueue(databaseUrl: string): Promise<void> {
  const pool = new pg.Pool({ connectionString: databaseUrl, max: 1, application_name: 'coalhand jobs' })
  pool.on('error', () => undefined)
  pool.on('connect', (client) => client.on('error', () => undefined))
  try {
    await runMigrations({ pgPool: pool, logger: new Logger(() => () => undefined) })
  } finally {
    await pool.end()
  }
}
