import { open, rename, stat } from 'node:fs/promises'
import { createServer } from 'node:net'
import { join } from 'node:path'
import type { Cluster } from './cluster.ts'
import { PostgresUnavailable } from './errors.ts'
import { readPostmaster } from './left-overs.ts'
import { run } from './run-as.ts'

/** Below the range that Linux hands out to outgoing connections, so that the port stays free overnight. */
const firstPort = 15_432
const ports = 200

/** The log is set aside at a start once it has grown to this many bytes. */
const logLimit = 8_000_000

const startSeconds = 300
const fastSeconds = 30
const immediateSeconds = 10

/** Starts the server on the remembered port, or on the next free one when that is taken; returns the port. */
export async function launch(
  cluster: Cluster,
  remembered: number | undefined,
  settings: Record<string, string>,
  log: (line: string) => void,
): Promise<number> {
  await setLogAside(cluster)
  for (const port of candidates(remembered)) {
    if (!(await isFree(port))) continue
    const logged = await logSize(cluster)
    const outcome = await ctl(cluster, [
      ...['start', '-w', '-t', String(startSeconds), '-l', 'server.log'],
      ...['-o', serverOptions(port, settings)],
    ])
    if (outcome.code === 0) {
      if (remembered !== undefined && port !== remembered) {
        log(`Port ${remembered} is taken; PostgreSQL is on port ${port} from now on`)
      } else log(`PostgreSQL is on port ${port}`)
      return port
    }
    // Somebody may have taken the port since it was looked at.
    if (await isFree(port)) throw new PostgresUnavailable(await whyNot(cluster, logged, outcome.stderr))
  }
  throw new PostgresUnavailable(
    `No port from ${firstPort} to ${firstPort + ports - 1} is free on 127.0.0.1 for PostgreSQL: free one, ` +
      'or name a server of your own in DATABASE_URL.',
  )
}

/** Stops the server: fast, and at once when that takes longer than 30 s. Does nothing when none is running. */
export async function shutDown(cluster: Cluster, log: (line: string) => void): Promise<void> {
  if ((await readPostmaster(cluster)) === undefined) return
  const fast = await ctl(cluster, ['stop', '-m', 'fast', '-w', '-t', String(fastSeconds)])
  if (fast.code === 0 || (await isDown(cluster))) return
  log(`PostgreSQL did not stop within ${fastSeconds} s; stopping it at once, it recovers at the next start`)
  await ctl(cluster, ['stop', '-m', 'immediate', '-w', '-t', String(immediateSeconds)])
}

async function isDown(cluster: Cluster): Promise<boolean> {
  // pg_ctl status: 3 means no server is running.
  return (await ctl(cluster, ['status'])).code === 3
}

/** From within the directory: pg_ctl hands its path to a shell, which a `$` or a quote in it would mislead. */
function ctl({ programs, directory, owner }: Cluster, args: string[]) {
  return run(owner, join(programs, 'pg_ctl'), ['-D', '.', ...args], { cwd: directory })
}

/** pg_ctl hands these to a shell, so only plain words are let through. */
function serverOptions(port: number, settings: Record<string, string>): string {
  const all = {
    listen_addresses: '127.0.0.1',
    port: String(port),
    // No socket file: nothing to go stale, and no limit on the length of the folder's path.
    unix_socket_directories: "''",
    timezone: 'UTC',
    // Seen in `ps`.
    cluster_name: 'coalhand',
    ...settings,
  }
  for (const [name, value] of Object.entries(settings)) {
    if (!/^[a-z_.]+$/.test(name) || !/^[\w.-]+$/.test(value)) {
      throw new PostgresUnavailable(`"${name}=${value}" is not a plain PostgreSQL parameter.`)
    }
  }
  return Object.entries(all)
    .map(([name, value]) => `-c ${name}=${value}`)
    .join(' ')
}

function candidates(remembered: number | undefined): number[] {
  const range = Array.from({ length: ports }, (_, index) => firstPort + index)
  return remembered === undefined ? range : [remembered, ...range.filter((port) => port !== remembered)]
}

function isFree(port: number): Promise<boolean> {
  return new Promise((resolve) => {
    const server = createServer()
    server.on('error', () => resolve(false))
    server.listen({ port, host: '127.0.0.1', exclusive: true }, () => server.close(() => resolve(true)))
  })
}

async function logSize({ directory }: Cluster): Promise<number> {
  return (await stat(join(directory, 'server.log')).catch(() => undefined))?.size ?? 0
}

async function setLogAside(cluster: Cluster): Promise<void> {
  const file = join(cluster.directory, 'server.log')
  if ((await logSize(cluster)) > logLimit) await rename(file, `${file}.old`)
}

/** The server's own last complaint since this start, else pg_ctl's. */
async function whyNot({ directory }: Cluster, from: number, otherwise: string): Promise<string> {
  const file = join(directory, 'server.log')
  const text = await readFrom(file, from).catch(() => '')
  const complaint = /(?:FATAL|PANIC|ERROR): .*/.exec(text)?.[0] ?? otherwise.trim().split('\n').at(-1) ?? ''
  return `PostgreSQL did not start: ${complaint} (see ${file}).`
}

async function readFrom(file: string, from: number): Promise<string> {
  const handle = await open(file)
  try {
    const { size } = await handle.stat()
    const buffer = Buffer.alloc(Math.min(Math.max(size - from, 0), 100_000))
    await handle.read(buffer, 0, buffer.length, from)
    return buffer.toString('utf8')
  } finally {
    await handle.close()
  }
}
