import { readdir, readFile, rm } from 'node:fs/promises'
import { join } from 'node:path'
import { findOrMakeCluster } from '../../../server/setup/postgres/cluster.ts'
import { launch } from '../../../server/setup/postgres/launch.ts'
import { prepareDataDir } from '../../../server/setup/postgres/data-dir.ts'
import { readPostmaster } from '../../../server/setup/postgres/left-overs.ts'
import { run } from '../../../server/setup/postgres/run-as.ts'
import { writeState } from '../../../server/setup/postgres/state.ts'
import { startPostgres } from '../../../server/setup/postgres.ts'

/** A PostgreSQL of a scenario's own, which can be stopped, frozen and killed. */
export interface OwnPostgres {
  /** A connection string for Coalhand's database, password included. */
  url: string
  /** As `pg_ctl restart` does it; resolves when it takes connections again. */
  restart: (mode: 'fast' | 'immediate') => Promise<void>
  /** kill -9 of the postmaster alone; its other processes find out by themselves. */
  killPostmaster: () => Promise<void>
  /** What Coalhand does at its start: clears what a killed server left, and starts it. */
  recover: () => Promise<void>
  stop: (mode: 'fast' | 'immediate') => Promise<void>
  start: () => Promise<void>
  /** SIGSTOP of the postmaster and all its processes: connections stay open and nothing answers. */
  freeze: () => Promise<void>
  thaw: () => Promise<void>
  /** Stops it for good and removes its data. */
  destroy: () => Promise<void>
}

/** @param settings server parameters, such as `{ max_connections: '30' }` */
export async function startOwnPostgres(
  dataDir: string,
  settings: Record<string, string>,
): Promise<OwnPostgres> {
  const log = () => undefined
  const options = { dataDir, log, settings }
  // A port of its own: where others take the next free one, it would be gone while this server is stopped.
  const ownPort = 17_000 + (process.pid % 2_000)
  await writeState(await prepareDataDir(dataDir), {
    directory: join(dataDir, 'postgres'),
    port: ownPort,
    users: [],
  })
  const uses = [await startPostgres(options)]
  const url = uses[0]?.url ?? ''
  const port = Number(new URL(url).port)
  const cluster = await findOrMakeCluster({
    dataDir,
    remembered: undefined,
    fallbackRoot: '/var/lib/coalhand',
    log,
  })
  let frozen: number[] = []

  async function control(...args: string[]): Promise<void> {
    const outcome = await run(cluster.owner, join(cluster.programs, 'pg_ctl'), ['-D', '.', ...args], {
      cwd: cluster.directory,
    })
    if (outcome.code !== 0) throw new Error(`pg_ctl ${args.join(' ')}: ${outcome.stderr || outcome.stdout}`)
  }

  async function postmaster(): Promise<number> {
    const found = await readPostmaster(cluster)
    if (!found) throw new Error('PostgreSQL does not run.')
    return found.pid
  }

  function thaw(): Promise<void> {
    for (const pid of frozen.splice(0).reverse()) signal(pid, 'SIGCONT')
    return Promise.resolve()
  }

  return {
    url,
    restart: (mode) => control('restart', '-m', mode, '-w', '-t', '120', '-l', 'server.log'),
    killPostmaster: async () => {
      process.kill(await postmaster(), 'SIGKILL')
    },
    recover: async () => {
      uses.push(await startPostgres(options))
    },
    stop: (mode) => control('stop', '-m', mode, '-w', '-t', '120'),
    start: async () => {
      const now = await launch(cluster, port, settings, log)
      if (now !== port) throw new Error(`Somebody took PostgreSQL’s port ${port} while it was stopped.`)
    },
    freeze: async () => {
      const parent = await postmaster()
      // The postmaster first: from then on there are no new ones.
      process.kill(parent, 'SIGSTOP')
      const children = await childrenOf(parent)
      frozen = [parent, ...children]
      for (const pid of children) signal(pid, 'SIGSTOP')
    },
    thaw,
    destroy: async () => {
      await thaw()
      for (const use of uses.reverse()) await use.stop()
      await rm(cluster.directory, { recursive: true, force: true })
      await rm(dataDir, { recursive: true, force: true })
    },
  }
}

async function childrenOf(parent: number): Promise<number[]> {
  const pids = (await readdir('/proc')).filter((name) => /^\d+$/.test(name)).map(Number)
  const parents = await Promise.all(
    pids.map(async (pid) => {
      const stat = await readFile(`/proc/${pid}/stat`, 'utf8').catch(() => '')
      // The second field is the program's name in brackets and may hold anything: count from its end.
      return Number(stat.slice(stat.lastIndexOf(')') + 2).split(' ')[1])
    }),
  )
  return pids.filter((_, index) => parents[index] === parent)
}

/** One that has ended meanwhile needs no signal. */
function signal(pid: number, name: 'SIGSTOP' | 'SIGCONT'): void {
  try {
    process.kill(pid, name)
  } catch {
    // Gone.
  }
}
