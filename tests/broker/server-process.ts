import { spawn, type ChildProcess } from 'node:child_process'
import { createServer } from 'node:net'
import { once } from 'node:events'
import { fileURLToPath } from 'node:url'
import { z } from 'zod'

/** A server of its own process, which can be killed. */
export interface ServerProcess {
  /** kill -9, and waits until it is gone. */
  kill: () => Promise<void>
}

const entry = fileURLToPath(new URL('./serve.ts', import.meta.url))
const root = fileURLToPath(new URL('../../', import.meta.url))

/** Starts a server on a database and a port for devices; resolves when it listens. */
export async function startServerProcess(databaseUrl: string, mqttPort: number): Promise<ServerProcess> {
  const child: ChildProcess = spawn(
    process.execPath,
    ['--import', 'tsx', entry, databaseUrl, String(mqttPort)],
    {
      cwd: root,
      stdio: ['ignore', 'pipe', 'inherit'],
    },
  )
  const left = once(child, 'exit')
  const listens = new Promise<void>((resolve) => child.stdout?.once('data', () => resolve()))
  const first = await Promise.race([listens.then(() => 'listens'), left.then(() => 'left')])
  if (first === 'left') throw new Error('The server did not start.')
  return {
    kill: async () => {
      child.kill('SIGKILL')
      await left
    },
  }
}

/** A port of loopback that nobody listens on just now. */
export async function freePort(): Promise<number> {
  const server = createServer().listen(0, '127.0.0.1')
  await once(server, 'listening')
  const { port } = z.object({ port: z.number() }).parse(server.address())
  server.close()
  await once(server, 'close')
  return port
}
