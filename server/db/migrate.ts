import knex, { type Knex } from 'knex'
import { z } from 'zod'
import * as peopleAndSites from '../../migrations/0001_people_and_sites.ts'
import * as fleet from '../../migrations/0002_fleet.ts'
import * as cooks from '../../migrations/0003_cooks.ts'
import * as readings from '../../migrations/0004_readings.ts'
import * as deviceConnections from '../../migrations/0005_device_connections.ts'
import * as readings15m from '../../migrations/0006_readings_15m.ts'
import * as jobRuns from '../../migrations/0007_job_runs.ts'
import { migrateQueue } from './queue-schema.ts'

const steps = new Map<string, Knex.Migration>([
  ['0001_people_and_sites', peopleAndSites],
  ['0002_fleet', fleet],
  ['0003_cooks', cooks],
  ['0004_readings', readings],
  ['0005_device_connections', deviceConnections],
  ['0006_readings_15m', readings15m],
  ['0007_job_runs', jobRuns],
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
 * Brings a database to the newest schema, the queue's own tables too. Safe to call from several processes: Knex takes
 * a lock.
 * @returns the names of the migrations that were run
 */
export async function migrate(db: Knex): Promise<string[]> {
  const [, names] = LatestAnswer.parse(await db.migrate.latest({ migrationSource }))
  await migrateQueue(addressOf(db))
  return names
}

/** The same for a database that nothing is connected to yet. */
export async function migrateToLatest(url: string): Promise<string[]> {
  const db = knex({ client: 'pg', connection: { connectionString: url }, pool: { min: 0, max: 2 } })
  try {
    return await migrate(db)
  } finally {
    await db.destroy()
  }
}

/** Where a pool connects to. */
function addressOf(db: Knex): string {
  const client: unknown = db.client
  const { connection } = WithAddress.parse(client).config
  return typeof connection === 'string' ? connection : connection.connectionString
}

const WithAddress = z.object({
  config: z.object({ connection: z.union([z.string(), z.object({ connectionString: z.string() })]) }),
})
