import { existsSync } from 'node:fs'
import { readdir, rm } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { startPostgres } from '../../server/setup/postgres.ts'

/** The folder of this process's PostgreSQL, and of whatever else it needs. */
export function runFolder(prefix: string): string {
  return join(tmpdir(), `${prefix}${process.pid}`)
}

/** Clears away the servers and folders of runs with this prefix that were killed. */
export async function clearEarlierRuns(prefix: string): Promise<void> {
  for (const name of await readdir(tmpdir())) {
    const pid = Number(name.slice(prefix.length))
    if (!name.startsWith(prefix) || !Number.isInteger(pid) || existsSync(`/proc/${pid}`)) continue
    await clear(join(tmpdir(), name)).catch((error: unknown) => {
      // Another run may be clearing it at this moment; it is in nobody's way.
      console.warn(`An earlier run's ${name} could not be cleared away: ${String(error)}`)
    })
  }
}

async function clear(dataDir: string): Promise<void> {
  if (existsSync(join(dataDir, 'postgres/postmaster.pid'))) {
    const left = await startPostgres({ dataDir, log: () => undefined })
    await left.stop()
  }
  await rm(dataDir, { recursive: true, force: true })
}
