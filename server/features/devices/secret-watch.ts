import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Clock } from '#shared/domain/clock.ts'
import type { DeviceBook } from './device-book.ts'
import type { DeviceConnections } from './device-connections.ts'
import { secretRows } from './secret-rows.ts'

export interface SecretWatchDeps {
  db: Knex
  clock: Clock
  book: Pick<DeviceBook, 'invalidate'>
  connections: Pick<DeviceConnections, 'secretsInUse' | 'endSecrets'>
  log: Logger
}

/** How long a connection may outlive its secret, in ms. */
const everyMs = 5_000

/**
 * Closes connections whose secret has come to its end, or was ended by another process, such as a command.
 * @returns ends the watch
 */
export function watchSecrets({ db, clock, book, connections, log }: SecretWatchDeps): () => void {
  const rows = secretRows(db)
  let looking = false

  async function look(): Promise<void> {
    const inUse = [...connections.secretsInUse()]
    if (inUse.length === 0) return
    const ended = await rows.endedOf(inUse, clock.now())
    if (ended.size === 0) return
    book.invalidate()
    connections.endSecrets(ended)
  }

  const timer = setInterval(() => {
    if (looking) return
    looking = true
    look()
      // The database is away: whoever is connected stays so meanwhile.
      .catch((error: unknown) => log.debug({ err: error }, 'Secrets could not be looked at'))
      .finally(() => (looking = false))
  }, everyMs)
  return () => clearInterval(timer)
}
