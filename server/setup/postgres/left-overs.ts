import { readFile, rm } from 'node:fs/promises'
import { join } from 'node:path'
import { systemClock } from '#shared/domain/clock.ts'
import type { Cluster } from './cluster.ts'
import { PostgresUnavailable } from './errors.ts'
import { run } from './run-as.ts'

const graceMs = 10_000

/** What PostgreSQL wrote of itself in postmaster.pid; undefined after an orderly stop. */
export async function readPostmaster({
  directory,
}: Cluster): Promise<{ pid: number; port: number } | undefined> {
  const text = await readFile(join(directory, 'postmaster.pid'), 'utf8').catch(() => undefined)
  if (text === undefined) return undefined
  // Line 1 is the process, line 4 the port (PostgreSQL's miscadmin.h); the port may not be there yet.
  const lines = text.split('\n')
  const [pid, port] = [Number(lines[0]), Number(lines[3] ?? 0)]
  return Number.isInteger(pid) && pid > 0 ? { pid, port: Number.isInteger(port) ? port : 0 } : undefined
}

/** Whether that process is a PostgreSQL of this data directory, and not another one with a number used again. */
export async function isPostmaster(cluster: Cluster, pid: number): Promise<boolean> {
  return (await processesIn(cluster)).includes(pid)
}

/**
 * Clears what a killed server left behind. Its helper processes end by themselves soon after; they are
 * waited for, then told to quit. A pid file whose number now belongs to something else is taken away, as
 * PostgreSQL would take that process for itself and refuse to start.
 */
export async function clearLeftOvers(
  cluster: Cluster,
  deadPid: number,
  log: (line: string) => void,
): Promise<void> {
  log('PostgreSQL was not stopped in order last time; it recovers by itself')
  await waitUntilGone(cluster, graceMs / 2)
  for (const pid of await processesIn(cluster)) await run(cluster.owner, 'kill', ['-QUIT', String(pid)])
  await waitUntilGone(cluster, graceMs)
  const left = await processesIn(cluster)
  if (left.length > 0) {
    throw new PostgresUnavailable(
      `Left-over PostgreSQL processes (${left.join(', ')}) still hold ${cluster.directory}: end them, then start again.`,
    )
  }
  const present = await readPostmaster(cluster)
  if (present?.pid === deadPid) await rm(join(cluster.directory, 'postmaster.pid'), { force: true })
}

async function waitUntilGone(cluster: Cluster, ms: number): Promise<void> {
  const deadline = systemClock.now() + ms
  while (systemClock.now() < deadline && (await processesIn(cluster)).length > 0) {
    await new Promise((resolve) => setTimeout(resolve, 100))
  }
}

/**
 * PostgreSQL's processes that work in the data directory: they go there first thing. Asked as their owner,
 * since even root may not look into another user's process in a container.
 */
async function processesIn({ directory, owner }: Cluster): Promise<number[]> {
  const args = ['/proc', '-mindepth', '2', '-maxdepth', '2', '-name', 'cwd', '-printf', '%h %l\\n']
  const { stdout } = await run(owner, 'find', args)
  const there = stdout
    .split('\n')
    .map((line) => /^\/proc\/(\d+) (.*)$/.exec(line))
    .filter((match) => match?.[2] === directory)
    .map((match) => Number(match?.[1]))
  // Somebody's shell may stand in the folder too.
  const names = await Promise.all(there.map((pid) => readFile(`/proc/${pid}/comm`, 'utf8').catch(() => '')))
  return there.filter((_, index) => names[index]?.trim() === 'postgres')
}
