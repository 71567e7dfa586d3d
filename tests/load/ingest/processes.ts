import { spawn, type ChildProcess } from 'node:child_process'
import { once } from 'node:events'
import { createServer } from 'node:net'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import { z } from 'zod'
import type { Load, LoadResult } from './raw-publisher.ts'

/** A broker under test, in a process of its own. */
export interface TestedBroker {
  port: number
  pid: number
  stop: () => Promise<void>
}

const root = fileURLToPath(new URL('../../../', import.meta.url))
const viaTsx = ['--import', 'tsx']

/** Publishes from a process of its own, so that sender and broker do not share a thread. */
export async function publishFromProcess(load: Load): Promise<LoadResult> {
  const child = run([...viaTsx, 'tests/load/ingest/publisher-process.ts', JSON.stringify(load)])
  const [line] = await Promise.all([firstLine(child, (text) => text.startsWith('{')), once(child, 'exit')])
  return LoadResult.parse(JSON.parse(line))
}

export async function startBareBroker(): Promise<TestedBroker> {
  const child = run([...viaTsx, 'tests/load/ingest/bare-broker.ts'])
  const { port } = z.object({ port: z.int() }).parse(JSON.parse(await firstLine(child, () => true)))
  return broker(child, port)
}

/** The server as `npm start` runs it, on a database that is there already. */
export async function startWholeServer(options: {
  databaseUrl: string
  dataDir: string
  command: readonly string[]
}): Promise<TestedBroker> {
  const port = await freePort()
  const child = run(options.command, {
    DATABASE_URL: options.databaseUrl,
    DATA_DIR: options.dataDir,
    MQTT_PORT: String(port),
    PORT: '0',
    DEMO: 'off',
    LOG_LEVEL: 'info',
    NODE_ENV: 'production',
  })
  await firstLine(child, (line) => line.includes('Coalhand stands at'))
  return broker(child, port)
}

const LoadResult = z.object({
  sent: z.number(),
  perSecond: z.number(),
  medianMs: z.number(),
  p99Ms: z.number(),
  maxMs: z.number(),
})

function run(args: readonly string[], environment: NodeJS.ProcessEnv = {}): ChildProcess {
  return spawn(process.execPath, args, {
    cwd: root,
    stdio: ['ignore', 'pipe', 'inherit'],
    env: { ...process.env, ...environment },
  })
}

function broker(child: ChildProcess, port: number): TestedBroker {
  return {
    port,
    pid: child.pid ?? 0,
    stop: async () => {
      if (child.exitCode !== null || child.signalCode !== null) return
      const left = once(child, 'exit')
      child.kill('SIGTERM')
      await left
    },
  }
}

/** The first line of its output that fits; what follows is read and dropped. */
function firstLine(child: ChildProcess, fits: (line: string) => boolean): Promise<string> {
  const { stdout } = child
  if (!stdout) throw new Error('A process without output.')
  return new Promise((resolve, reject) => {
    createInterface({ input: stdout }).on('line', (line) => {
      if (fits(line)) resolve(line)
    })
    child.once('error', reject)
    child.once('close', (code) => reject(new Error(`A process of the benchmark ended early, with ${code}.`)))
  })
}

async function freePort(): Promise<number> {
  const server = createServer().listen(0, '127.0.0.1')
  await once(server, 'listening')
  const { port } = z.object({ port: z.number() }).parse(server.address())
  server.close()
  await once(server, 'close')
  return port
}
