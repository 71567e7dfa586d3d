import { randomBytes } from 'node:crypto'
import { parseArgs } from 'node:util'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { ConfigError } from '../config.ts'
import { createPasswords } from '../features/session/password.ts'
import { PostgresUnavailable } from '../setup/postgres.ts'
import { HouseExists, HouseToCreate, createHouse } from './create-house.ts'
import { withHouseDatabase } from './with-house-database.ts'

const usage = `Makes the first site and its owner in an empty house.

npm run house:create -- --name "Quarry Road" --site quarry-road --time-zone America/Chicago \\
  --owner-email ines@quarryroad.example [--owner-name "Ines Marrow"] [--elevation-m 210]`

class UsageError extends Error {}

try {
  const house = readArguments()
  const password = randomBytes(12).toString('base64url')
  const passwordHash = await createPasswords().hash(password)
  const say = (line: string) => console.error(line)
  await withHouseDatabase((db) => createHouse(db, house, { passwordHash, now: systemClock.now() }), say)
  console.log(
    `${house.name} is ready. ${house.ownerName} signs in as ${house.ownerEmail} with this password,`,
  )
  console.log(`which is shown this once: ${password}`)
} catch (error) {
  if (!isForPeople(error)) throw error
  console.error(error.message)
  process.exitCode = 1
}

function readArguments(): HouseToCreate {
  const parsed = HouseToCreate.safeParse(namedArguments())
  if (parsed.success) return parsed.data
  throw new UsageError(`${z.prettifyError(parsed.error)}\n\n${usage}`)
}

function namedArguments() {
  const text = { type: 'string' as const }
  try {
    const { values } = parseArgs({
      options: {
        name: text,
        site: text,
        'time-zone': text,
        'elevation-m': text,
        'owner-email': text,
        'owner-name': text,
      },
    })
    return {
      name: values.name,
      site: values.site,
      timeZone: values['time-zone'],
      elevationM: values['elevation-m'],
      ownerEmail: values['owner-email'],
      ownerName: values['owner-name'],
    }
  } catch (error) {
    throw new UsageError(`${error instanceof Error ? error.message : String(error)}\n\n${usage}`)
  }
}

/** Errors whose words are meant for whoever runs the command. */
function isForPeople(error: unknown): error is Error {
  return [UsageError, HouseExists, ConfigError, PostgresUnavailable].some((kind) => error instanceof kind)
}
