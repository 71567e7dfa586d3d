import { parseArgs } from 'node:util'
import type { Knex } from 'knex'
import { z } from 'zod'
import { ConfigError } from '../config.ts'
import { HttpProblem } from '../http/problem.ts'
import { PostgresUnavailable } from '../setup/postgres.ts'
import { withHouseDatabase } from './with-house-database.ts'

/** What was typed cannot be done; its words are for whoever typed it. */
export class UsageError extends Error {}

const SiteRow = z.object({ id: z.int(), slug: z.string() })

/**
 * Runs a command about devices on the house's database and prints its answer as one line of JSON. Standard output
 * carries that line only: whoever calls this reads it with a program.
 */
export async function deviceCommand<Options extends z.ZodObject>(
  { usage, options }: { usage: string; options: Options },
  work: (db: Knex, asked: z.output<Options>) => Promise<unknown>,
): Promise<void> {
  try {
    const asked = readArguments(usage, options)
    const answer = await withHouseDatabase(
      (db) => work(db, asked),
      (line) => console.error(line),
    )
    console.log(JSON.stringify(answer))
  } catch (error) {
    if (!isForPeople(error)) throw error
    console.error(error.message)
    process.exitCode = 1
  }
}

/** @throws UsageError that names the sites there are */
export async function siteNamed(db: Knex, slug: string): Promise<{ id: number; slug: string }> {
  const row: unknown = await db('sites').where({ slug }).first('id', 'slug')
  const site = SiteRow.optional().parse(row)
  if (site) return site
  const rows: unknown = await db('sites').orderBy('slug').select('slug')
  const slugs = z
    .array(z.object({ slug: z.string() }))
    .parse(rows)
    .map((one) => one.slug)
  const there =
    slugs.length === 0
      ? 'The house has no site yet: start the server, or make one with house:create.'
      : `There are: ${slugs.join(', ')}.`
  throw new UsageError(`There is no site “${slug}”. ${there}`)
}

function readArguments<Options extends z.ZodObject>(usage: string, options: Options): z.output<Options> {
  const parsed = options.safeParse(namedArguments(usage, Object.keys(options.shape)))
  if (parsed.success) return parsed.data
  throw new UsageError(`${z.prettifyError(parsed.error)}\n\n${usage}`)
}

function namedArguments(usage: string, names: readonly string[]) {
  const text = { type: 'string' as const }
  try {
    return parseArgs({ options: Object.fromEntries(names.map((name) => [name, text])) }).values
  } catch (error) {
    throw new UsageError(`${error instanceof Error ? error.message : String(error)}\n\n${usage}`)
  }
}

/** Errors whose words are meant for whoever runs the command. */
function isForPeople(error: unknown): error is Error {
  return [UsageError, ConfigError, PostgresUnavailable, HttpProblem].some((kind) => error instanceof kind)
}
