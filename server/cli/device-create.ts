import { parseArgs } from 'node:util'
import type { Knex } from 'knex'
import { z } from 'zod'
import { Slug } from '#shared/contract/common.ts'
import { deviceEndpoints, type NewDevice } from '#shared/contract/device.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { ConfigError } from '../config.ts'
import { createDeviceBook } from '../features/devices/device-book.ts'
import { createDeviceService } from '../features/devices/service.ts'
import { PostgresUnavailable } from '../setup/postgres.ts'
import { withHouseDatabase } from './with-house-database.ts'

const usage = `Adds a device and prints its credentials as one line of JSON; the secret is shown this once.

npm run --silent device:create -- --site quarry-road --name "North box" --channels 4`

const DeviceToCreate = z.object({
  site: Slug,
  name: deviceEndpoints.add.body.shape.name,
  channels: z.coerce.number().pipe(deviceEndpoints.add.body.shape.channels),
})
const SiteRow = z.object({ id: z.int(), slug: z.string() })

class UsageError extends Error {}

try {
  const device = readArguments()
  // Standard output carries the one line only: whoever calls this reads it with a program.
  const added = await withHouseDatabase(
    (db) => addDevice(db, device),
    (line) => console.error(line),
  )
  console.log(JSON.stringify(added))
} catch (error) {
  if (!isForPeople(error)) throw error
  console.error(error.message)
  process.exitCode = 1
}

async function addDevice(
  db: Knex,
  { site: slug, ...device }: z.infer<typeof DeviceToCreate>,
): Promise<NewDevice> {
  const row: unknown = await db('sites').where({ slug }).first('id', 'slug')
  const site = SiteRow.optional().parse(row)
  if (!site) throw new UsageError(`There is no site “${slug}”. ${await sitesThereAre(db)}`)
  const devices = createDeviceService({
    db,
    clock: systemClock,
    book: createDeviceBook({ db, clock: systemClock }),
    // A server that runs meanwhile finds the device in the database when it first signs in.
    publish: () => undefined,
  })
  return devices.add({ site }, device)
}

async function sitesThereAre(db: Knex): Promise<string> {
  const rows: unknown = await db('sites').orderBy('slug').select('slug')
  const slugs = z.array(z.object({ slug: z.string() })).parse(rows)
  return slugs.length === 0
    ? 'The house has no site yet: start the server, or make one with house:create.'
    : `There are: ${slugs.map(({ slug }) => slug).join(', ')}.`
}

function readArguments(): z.infer<typeof DeviceToCreate> {
  const parsed = DeviceToCreate.safeParse(namedArguments())
  if (parsed.success) return parsed.data
  throw new UsageError(`${z.prettifyError(parsed.error)}\n\n${usage}`)
}

function namedArguments() {
  const text = { type: 'string' as const }
  try {
    return parseArgs({ options: { site: text, name: text, channels: text } }).values
  } catch (error) {
    throw new UsageError(`${error instanceof Error ? error.message : String(error)}\n\n${usage}`)
  }
}

/** Errors whose words are meant for whoever runs the command. */
function isForPeople(error: unknown): error is Error {
  return [UsageError, ConfigError, PostgresUnavailable].some((kind) => error instanceof kind)
}
