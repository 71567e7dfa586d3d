import { createHash } from 'node:crypto'
import { chmod, chown, mkdir, readdir, readFile, rename, rm, stat } from 'node:fs/promises'
import { dirname, join } from 'node:path'
import { findPostgres } from '../find-postgres.mjs'
import { PostgresUnavailable } from './errors.ts'
import { readOrMakePassword, setPassword } from './password.ts'
import { ownUser, postgresUser, run, type OsUser } from './run-as.ts'

/** A PostgreSQL data directory with what is needed to run it. */
export interface Cluster {
  /** The data directory. */
  directory: string
  /** Where the server's programs are. */
  programs: string
  /** The unprivileged user who owns the data and runs the server. */
  owner: OsUser
  /** The password of the database role `coalhand`. */
  password: string
}

export interface ClusterOptions {
  dataDir: string
  /** Where the data were at the last start. */
  remembered: string | undefined
  fallbackRoot: string
  log: (line: string) => void
}

/** Finds the data directory of a data folder, or makes it at the first start. */
export async function findOrMakeCluster(options: ClusterOptions): Promise<Cluster> {
  const { dataDir, remembered, fallbackRoot, log } = options
  const password = await readOrMakePassword(dataDir)
  const found = await existing(join(dataDir, 'postgres'), fallbackOf(dataDir, fallbackRoot))
  if (found !== undefined) {
    const version = Number((await readFile(join(found, 'PG_VERSION'), 'utf8')).trim())
    const { uid, gid } = await stat(found)
    return { directory: found, programs: programsFor(version), owner: await mayRunAs({ uid, gid }), password }
  }
  refuseLost(await existing(remembered), dataDir, fallbackOf(dataDir, fallbackRoot))
  const owner = ownUser().uid === 0 ? await postgresUser() : ownUser()
  const directory = await chooseDirectory(options, owner)
  const cluster = { directory, programs: programsFor(undefined), owner, password }
  log(`Making PostgreSQL's data directory ${directory}`)
  await make(cluster)
  return cluster
}

async function existing(...candidates: (string | undefined)[]): Promise<string | undefined> {
  for (const directory of candidates) {
    if (directory === undefined) continue
    const isCluster = await stat(join(directory, 'PG_VERSION')).then(
      () => true,
      () => false,
    )
    if (isCluster) return directory
  }
  return undefined
}

/** A folder that was moved or copied away from its database must not quietly begin an empty one. */
function refuseLost(elsewhere: string | undefined, dataDir: string, expected: string): void {
  if (elsewhere === undefined) return
  throw new PostgresUnavailable(
    `${dataDir} was moved or copied while its database stayed in ${elsewhere}: move that to ${expected}, ` +
      `or delete ${join(dataDir, 'postgres.json')} to begin with an empty one.`,
  )
}

async function mayRunAs(owner: OsUser): Promise<OsUser> {
  const self = ownUser()
  if (owner.uid === self.uid && self.uid !== 0) return owner
  if (self.uid === 0) return owner.uid === 0 ? postgresUser() : owner
  throw new PostgresUnavailable(
    `PostgreSQL's data belong to user ${owner.uid} and this is user ${self.uid}: start Coalhand as that user, ` +
      'or choose another folder in DATA_DIR.',
  )
}

function programsFor(version: number | undefined): string {
  const found = findPostgres(version === undefined ? {} : { version })
  if (found !== undefined) return found.directory
  throw new PostgresUnavailable(
    version === undefined
      ? 'PostgreSQL is not installed. Run: sudo apt-get update && sudo apt-get install --yes postgresql'
      : `The data were made by PostgreSQL ${version}, which is not installed: install postgresql-${version}, ` +
          'or choose another folder in DATA_DIR.',
  )
}

function fallbackOf(dataDir: string, fallbackRoot: string): string {
  const hash = createHash('sha256').update(dataDir).digest('hex').slice(0, 16)
  return join(fallbackRoot, hash, 'postgres')
}

/** DATA_DIR/postgres, unless a folder above it keeps PostgreSQL's user out. */
async function chooseDirectory(
  { dataDir, fallbackRoot, log }: ClusterOptions,
  owner: OsUser,
): Promise<string> {
  const inside = join(dataDir, 'postgres')
  if (await mayEnter(owner, dataDir)) return inside
  const outside = fallbackOf(dataDir, fallbackRoot)
  await mkdir(dirname(outside), { recursive: true, mode: 0o711 })
  await chmod(dirname(outside), 0o711)
  await chmod(fallbackRoot, 0o711)
  if (!(await mayEnter(owner, dirname(outside)))) {
    throw new PostgresUnavailable(
      `PostgreSQL's user may enter neither ${dataDir} nor ${dirname(outside)}: choose another folder in DATA_DIR.`,
    )
  }
  log(`PostgreSQL's user may not enter ${dataDir}; its data go to ${outside}`)
  return outside
}

async function mayEnter(owner: OsUser, directory: string): Promise<boolean> {
  return (await run(owner, 'test', ['-x', directory])).code === 0
}

/**
 * Makes the data directory under another name, complete with role and password, and gives it its name last:
 * a directory that bears the name is whole, wherever the power went.
 */
async function make(cluster: Cluster): Promise<void> {
  const { directory, programs, owner } = cluster
  const unfinished = `${directory}.new`
  await refuseForeign(directory)
  await rm(unfinished, { recursive: true, force: true })
  await mkdir(unfinished, { mode: 0o700 })
  if (owner.uid !== ownUser().uid) await chown(unfinished, owner.uid, owner.gid)
  // The superuser gets no password and no way in over TCP: only the owner of the files can be it, alone.
  const made = await run(owner, join(programs, 'initdb'), [
    ...['-D', unfinished, '-U', 'postgres', '-E', 'UTF8', '--locale=C.UTF-8', '--data-checksums'],
    ...['--auth-host=scram-sha-256', '--auth-local=peer'],
  ])
  if (made.code !== 0) {
    throw new PostgresUnavailable(`PostgreSQL could not make ${directory}: ${lastLine(made.stderr)}`)
  }
  await setPassword({ ...cluster, directory: unfinished })
  await rename(unfinished, directory)
}

/** An empty folder may be in the way of the new one; anything in it is somebody's. */
async function refuseForeign(directory: string): Promise<void> {
  const content = await readdir(directory).catch(() => undefined)
  if (content === undefined) return
  if (content.length > 0) {
    throw new PostgresUnavailable(
      `${directory} holds something that is no PostgreSQL data directory: move it away, or choose another folder in DATA_DIR.`,
    )
  }
  await rm(directory, { recursive: true })
}

function lastLine(text: string): string {
  return text.trim().split('\n').at(-1) ?? ''
}
