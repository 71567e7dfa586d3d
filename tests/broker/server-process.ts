import { spawn } from 'node:child_process'
import { createServer } from 'node:net'
import { once } from 'node:events'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import { z } from 'zod'

/** The server in earnest, in a process of its own, which can be killed. */
export interface ServerProcess {
  pid: number
  /** Where its pages are, `http://127.0.0.1:PORT`. */
  url: string
  /** Whether it still runs. */
  running: () => boolean
  /** kill -9, and waits until it is gone. */
  kill: () => Promise<void>
}

/** The same from its first moment, when it does not listen yet. */
export interface StartingServer {
  /** Resolves when it listens. Rejects when it ends before. */
  listens: Promise<ServerProcess>
  kill: () => Promise<void>
}

export interface ServerProcessOptions {
  databaseUrl: string
  mqttPort: number
  dataDir: string
  /** Told each line of its log. */
  onLine?: (line: string) => void
}

const root = fileURLToPath(new URL('../../', import.meta.url))

/** Starts a server on a database and a port for devices; resolves when it listens. */
export function startServerProcess(options: ServerProcessOptions): Promise<ServerProcess> {
  return launchServerProcess(options).listens
}

/** Starts a server and does not wait for it. */
export function launchServerProcess(options: ServerProcessOptions): StartingServer {
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
  const address = new Promise<string>((resolve) => {
    createInterface(child.stdout).on('line', (line) => {
      options.onLine?.(line)
      const [, url] = /Coalhand stands at (http:[^ ]*\d)/.exec(line) ?? []
      if (url !== undefined) resolve(url)
    })
  })
  const kill = async () => {
    child.kill('SIGKILL')
    await left
  }
  const listens = Promise.race([address, left.then(() => undefined)]).then((url) => {
    if (url === undefined || child.pid === undefined) throw new Error('The server did not start.')
    const running = () => child.exitCode === null && child.signalCode === null
    return { pid: child.pid, url, running, kill }
  })
  // Whoever kills it before it listens does not wait for that.
  listens.catch(() => undefined)
  return { listens, kill }
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
