import knex, { type Knex } from 'knex'
import { z } from 'zod'
import * as peopleAndSites from '../../migrations/0001_people_and_sites.ts'
import * as fleet from '../../migrations/0002_fleet.ts'
import * as cooks from '../../migrations/0003_cooks.ts'
import * as readings from '../../migrations/0004_readings.ts'

const steps = new Map<string, Knex.Migration>([
  ['0001_people_and_sites', peopleAndSites],
  ['0002_fleet', fleet],
  ['0003_cooks', cooks],
  ['0004_readings', readings],
])

/** Named here rather than found on disk, so that a build that lacks one fails at once. */
const migrationSource: Knex.MigrationSource<string> = {
  getMigrations: () => Promise.resolve([...steps.keys()]),
  getMigrationName: (name) => name,
  getMigration: (name) => {
    const step = steps.get(name)
    return step ? Promise.resolve(step) : Promise.reject(new Error(`No migration is called ${name}.`))
  },
}

/** Knex answers with the batch number and the names. */
const LatestAnswer = z.tuple([z.number(), z.array(z.string())])

/**
 * Brings a database to the newest schema. Safe to call from several processes: Knex takes a lock.
 * @returns the names of the migrations that were run
 */
export async function migrate(db: Knex): Promise<string[]> {
  const [, names] = LatestAnswer.parse(await db.migrate.latest({ migrationSource }))
  return names
}

/** The same for a database that nothing is connected to yet. */
export async function migrateToLatest(url: string): Promise<string[]> {
  const db = knex({ client: 'pg', connection: url, pool: { min: 0, max: 2 } })
  try {
    return await migrate(db)
  } finally {
    await db.destroy()
  }
}
