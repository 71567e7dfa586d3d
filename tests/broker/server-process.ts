import { spawn } from 'node:child_process'
import { createServer } from 'node:net'
import { once } from 'node:events'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import { z } from 'zod'

/** The server in earnest, in a process of its own, which can be killed. */
export interface ServerProcess {
  /** kill -9, and waits until it is gone. */
  kill: () => Promise<void>
}

const root = fileURLToPath(new URL('../../', import.meta.url))

/** Starts a server on a database and a port for devices; resolves when it listens. */
export async function startServerProcess(options: {
  databaseUrl: string
  mqttPort: number
  dataDir: string
}): Promise<ServerProcess> {
  const child = spawn(process.execPath, ['--import', 'tsx', 'server/main.ts'], {
    cwd: root,
    stdio: ['ignore', 'pipe', 'inherit'],
    env: {
      ...process.env,
      DATABASE_URL: options.databaseUrl,
      DATA_DIR: options.dataDir,
      MQTT_PORT: String(options.mqttPort),
      PORT: '0',
      DEMO: 'off',
      LOG_LEVEL: 'info',
    },
  })
  const left = once(child, 'exit')
  const listens = new Promise<void>((resolve) => {
    createInterface(child.stdout).on('line', (line) => {
      if (line.includes('Coalhand stands at')) resolve()
    })
  })
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
