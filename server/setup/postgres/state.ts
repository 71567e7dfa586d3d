import { readFile } from 'node:fs/promises'
import { join } from 'node:path'
import { z } from 'zod'
import { writePrivate } from './data-dir.ts'
import { errorCode } from './error-code.ts'
import { PostgresUnavailable } from './errors.ts'

/** One use of the server: a process, told from a later one of the same number by its start. */
const userSchema = z.object({ use: z.string(), pid: z.number().int(), started: z.string() })

/** What is remembered beside the data: where they are, on which port, and who uses the server now. */
const stateSchema = z.object({
  directory: z.string(),
  port: z.number().int().min(1).max(65535),
  users: z.array(userSchema),
})

export type PostgresUser = z.infer<typeof userSchema>
export type PostgresState = z.infer<typeof stateSchema>

/** Reads what was remembered; undefined at the first start. */
export async function readState(dataDir: string): Promise<PostgresState | undefined> {
  const file = join(dataDir, 'postgres.json')
  try {
    return stateSchema.parse(JSON.parse(await readFile(file, 'utf8')))
  } catch (error) {
    if (errorCode(error) === 'ENOENT') return undefined
    if (errorCode(error) === 'EACCES') {
      throw new PostgresUnavailable(
        `The data folder ${dataDir} belongs to another user: start Coalhand as that user, or choose another in DATA_DIR.`,
      )
    }
    throw new PostgresUnavailable(
      `${file} cannot be read as Coalhand wrote it: mend it, or move it away to have it made again.`,
    )
  }
}

export function writeState(dataDir: string, state: PostgresState): Promise<void> {
  return writePrivate(dataDir, 'postgres.json', `${JSON.stringify(state, undefined, 2)}\n`)
}

/** The users whose process is still there; those that were killed are forgotten. */
export async function livingUsers(state: PostgresState | undefined): Promise<PostgresUser[]> {
  const users = state?.users ?? []
  const alive = await Promise.all(users.map(async ({ pid, started }) => (await startOf(pid)) === started))
  return users.filter((_, index) => alive[index])
}

export async function addUser(users: PostgresUser[], use: string): Promise<PostgresUser[]> {
  const started = await startOf(process.pid)
  if (started === undefined) throw new Error('this process is not to be found in /proc')
  return [...users, { use, pid: process.pid, started }]
}

export function removeUser(users: PostgresUser[], use: string): PostgresUser[] {
  return users.filter((user) => user.use !== use)
}

/** When a process started, in the kernel's ticks since boot; undefined when there is none (or a dead one). */
async function startOf(pid: number): Promise<string | undefined> {
  try {
    const stat = await readFile(`/proc/${pid}/stat`, 'utf8')
    // The second field is the program's name in brackets and may hold anything: count from its end.
    const fields = stat.slice(stat.lastIndexOf(')') + 2).split(' ')
    const [dead, started] = [fields[0] === 'Z', fields[19]]
    return dead ? undefined : started
  } catch {
    return undefined
  }
}
