import { randomBytes } from 'node:crypto'
import { readFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { Cluster } from './cluster.ts'
import { writePrivate } from './data-dir.ts'
import { errorCode } from './error-code.ts'
import { PostgresUnavailable } from './errors.ts'
import { run } from './run-as.ts'

/** The database role that Coalhand works as: it owns its databases and is no superuser. */
export const role = 'coalhand'

/** The role's password, made at the first start and kept in the data folder with mode 600. */
export async function readOrMakePassword(dataDir: string): Promise<string> {
  const file = join(dataDir, 'postgres.password')
  try {
    const kept = (await readFile(file, 'utf8')).trim()
    if (kept !== '') return kept
  } catch (error) {
    if (errorCode(error) !== 'ENOENT') {
      throw new PostgresUnavailable(
        `${file} cannot be read (${errorCode(error)}): start Coalhand as the user who owns the data folder.`,
      )
    }
  }
  const made = randomBytes(24).toString('base64url')
  await writePrivate(dataDir, 'postgres.password', `${made}\n`)
  return made
}

/**
 * Gives the role its password, and makes the role when it is missing. The server must not be running: this
 * is PostgreSQL's single-user mode, which needs the files and nothing else.
 */
export async function setPassword({ directory, programs, owner, password }: Cluster): Promise<void> {
  // Single-user mode takes one statement a line. The password is base64url: nothing in it needs quoting.
  const statements = [
    `do $$ begin if not exists (select from pg_roles where rolname = '${role}') then create role ${role}; end if; end $$;`,
    `alter role ${role} login createdb password '${password}';`,
  ]
  const args = ['--single', '-D', directory, '-c', 'password_encryption=scram-sha-256', 'postgres']
  const outcome = await run(owner, join(programs, 'postgres'), args, { input: `${statements.join('\n')}\n` })
  const fault = /(?:ERROR|FATAL|PANIC): .*/.exec(outcome.stderr)?.[0]
  if (outcome.code !== 0 || fault !== undefined) {
    throw new PostgresUnavailable(`PostgreSQL's role could not be set up: ${fault ?? outcome.stderr.trim()}`)
  }
}
