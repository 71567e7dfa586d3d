import { randomUUID } from 'node:crypto'
import { systemClock } from '#shared/domain/clock.ts'
import { findOrMakeCluster, type Cluster } from './postgres/cluster.ts'
import { prepareDataDir } from './postgres/data-dir.ts'
import { PostgresUnavailable } from './postgres/errors.ts'
import { withLock } from './postgres/lock.ts'
import { clearLeftOvers, isPostmaster, readPostmaster } from './postgres/left-overs.ts'
import { launch, shutDown } from './postgres/launch.ts'
import { setPassword } from './postgres/password.ts'
import { ensureDatabase, probe, urlOf } from './postgres/sign-in.ts'
import { addUser, livingUsers, readState, removeUser, writeState } from './postgres/state.ts'

export { PostgresUnavailable } from './postgres/errors.ts'

export interface PostgresOptions {
  /** Coalhand's data folder; PostgreSQL's own lies in `postgres` below it. */
  dataDir: string
  log: (line: string) => void
  /** Server parameters for this start, such as `{ shared_buffers: '512MB' }`. A running server keeps its own. */
  settings?: Record<string, string>
  /** Where the data go when PostgreSQL's user may not enter `dataDir`. */
  fallbackRoot?: string
}

export interface RunningPostgres {
  /** A connection string for the database `coalhand`, password included. */
  url: string
  /** PostgreSQL's data directory. */
  directory: string
  /** Ends this use; the last one to end stops the server, fast, within 40 s. May be called twice. */
  stop: () => Promise<void>
}

/** How long a server that is just starting, recovering or stopping is waited for. */
const settleMs = 120_000

/**
 * Starts PostgreSQL on loopback with its data in `dataDir`, or joins the one that runs there already: a
 * server left over from a process that was killed, or one that another command of the same house uses.
 * As root it runs as Debian's user `postgres`, else as oneself.
 *
 * @throws PostgresUnavailable with one sentence that says what to do
 */
export async function startPostgres({
  dataDir: wanted,
  log,
  settings = {},
  fallbackRoot = '/var/lib/coalhand',
}: PostgresOptions): Promise<RunningPostgres> {
  const dataDir = await prepareDataDir(wanted)
  const use = randomUUID()

  const begin = () =>
    withLock(dataDir, async () => {
      const state = await readState(dataDir)
      const cluster = await findOrMakeCluster({ dataDir, remembered: state?.directory, fallbackRoot, log })
      const running = await joinRunning(cluster, log)
      const port = running ?? (await startAfresh(cluster, state?.port, settings, log))
      try {
        await ensureDatabase(cluster, port)
        const users = await addUser(await livingUsers(state), use)
        await writeState(dataDir, { directory: cluster.directory, port, users })
      } catch (error) {
        if (running === undefined) await shutDown(cluster, log)
        throw error
      }
      return { cluster, port }
    })

  const end = (cluster: Cluster) =>
    withLock(dataDir, async () => {
      const state = await readState(dataDir)
      if (state === undefined) return
      const users = removeUser(await livingUsers(state), use)
      await writeState(dataDir, { ...state, users })
      if (users.length > 0) {
        log('PostgreSQL goes on for another process that uses it')
        return
      }
      await shutDown(cluster, log)
    })

  const { cluster, port } = await begin()
  let ended: Promise<void> | undefined
  return {
    url: urlOf(cluster, port),
    directory: cluster.directory,
    stop: () => (ended ??= end(cluster)),
  }
}

/** The port of a server of ours that runs already and lets us in; undefined when there is none. */
async function joinRunning(cluster: Cluster, log: (line: string) => void): Promise<number | undefined> {
  const deadline = systemClock.now() + settleMs
  let told = false
  for (;;) {
    const postmaster = await readPostmaster(cluster)
    if (postmaster === undefined) return undefined
    if (!(await isPostmaster(cluster, postmaster.pid))) {
      await clearLeftOvers(cluster, postmaster.pid, log)
      return undefined
    }
    const answer = await probe(cluster, postmaster.port)
    if (answer === 'welcome') {
      log(`PostgreSQL is running already on port ${postmaster.port}`)
      return postmaster.port
    }
    if (answer === 'refused') {
      log('PostgreSQL does not take the password in the data folder; giving it that one')
      await shutDown(cluster, log)
      await setPassword(cluster)
      return undefined
    }
    if (systemClock.now() > deadline) {
      throw new PostgresUnavailable(
        `PostgreSQL (process ${postmaster.pid}) has not answered on port ${postmaster.port} for ` +
          `${settleMs / 1000} s; see ${cluster.directory}/server.log.`,
      )
    }
    if (!told) log('PostgreSQL is starting, recovering or stopping; waiting for it')
    told = true
    await pause(200)
  }
}

async function startAfresh(
  cluster: Cluster,
  remembered: number | undefined,
  settings: Record<string, string>,
  log: (line: string) => void,
): Promise<number> {
  const port = await launch(cluster, remembered, settings, log)
  if ((await probe(cluster, port)) !== 'refused') return port
  // The password file was lost or replaced while the server was down.
  log('PostgreSQL does not take the password in the data folder; giving it that one')
  await shutDown(cluster, log)
  await setPassword(cluster)
  return launch(cluster, port, settings, log)
}

function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms))
}
