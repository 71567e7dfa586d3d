import type { Knex } from 'knex'
import { readConfig } from '../config.ts'
import { openDatabase } from '../db/database.ts'
import { migrate } from '../db/migrate.ts'
import { startPostgres } from '../setup/postgres.ts'

/**
 * Lets a command work on the house's database, whether or not the server runs: the one that `DATABASE_URL` names, else
 * PostgreSQL in `DATA_DIR`, joined or started for as long as the command takes. Brings the schema up to date first.
 * @param say takes lines for the person who runs the command; not for standard output, which is the command's own
 */
export async function withHouseDatabase<T>(
  work: (db: Knex) => Promise<T>,
  say: (line: string) => void,
): Promise<T> {
  const { databaseUrl, dataDir } = readConfig()
  if (databaseUrl !== undefined) return connected(databaseUrl, work)
  const postgres = await startPostgres({ dataDir, log: say })
  try {
    return await connected(postgres.url, work)
  } finally {
    await postgres.stop()
  }
}

async function connected<T>(url: string, work: (db: Knex) => Promise<T>): Promise<T> {
  const db = openDatabase(url, { max: 2 })
  try {
    await migrate(db)
    return await work(db)
  } finally {
    await db.destroy()
  }
}
