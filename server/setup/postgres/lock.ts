import { createHash } from 'node:crypto'
import { createServer, type Server } from 'node:net'
import { systemClock } from '#shared/domain/clock.ts'
import { errorCode } from './error-code.ts'
import { PostgresUnavailable } from './errors.ts'

const patienceMs = 180_000

/**
 * Does `work` while no other process does any with the same data folder. The lock is a socket's name in
 * Linux's abstract namespace: the kernel frees it when its holder dies, however it dies.
 *
 * @throws PostgresUnavailable when another process holds the lock for three minutes
 */
export async function withLock<T>(dataDir: string, work: () => Promise<T>): Promise<T> {
  const name = `\0coalhand-${createHash('sha256').update(dataDir).digest('hex').slice(0, 32)}`
  const deadline = systemClock.now() + patienceMs
  let held = await tryHold(name)
  while (held === undefined) {
    if (systemClock.now() > deadline) {
      throw new PostgresUnavailable(
        `Another process has been starting or stopping PostgreSQL in ${dataDir} for three minutes: stop it first.`,
      )
    }
    await new Promise((resolve) => setTimeout(resolve, 100))
    held = await tryHold(name)
  }
  try {
    return await work()
  } finally {
    await release(held)
  }
}

function tryHold(name: string): Promise<Server | undefined> {
  return new Promise((resolve, reject) => {
    const server = createServer((socket) => socket.destroy())
    server.on('error', (error) => (errorCode(error) === 'EADDRINUSE' ? resolve(undefined) : reject(error)))
    server.listen(name, () => resolve(server))
  })
}

function release(server: Server): Promise<void> {
  return new Promise((resolve) => server.close(() => resolve()))
}
