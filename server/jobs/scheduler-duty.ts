import pg from 'pg'
import type { Logger } from 'pino'

/** The advisory lock that says which server process runs the jobs: two numbers of our own. */
const dutyLock = [7266, 1]

export interface DutyOptions {
  databaseUrl: string
  log: Logger
  /** Begins the work of the process on duty. @returns how to end it */
  begin: () => () => Promise<void>
  /** PostgreSQL notifications that the process on duty hears. */
  channel: string
  heard: (payload: string) => void
  /** How long another process on duty, or a database that is away, is waited for before the next try, ms. */
  retryMs?: number
}

export interface Duty {
  /** Whether this process runs the jobs now. */
  isOn: () => boolean
  stop: () => Promise<void>
}

/**
 * Of all server processes of a house one runs the jobs: the one that holds an advisory lock on a connection of its
 * own. When that process or its connection dies, PostgreSQL frees the lock and another takes over.
 */
export function takeTurns({ databaseUrl, log, begin, channel, heard, retryMs = 5000 }: DutyOptions): Duty {
  let stopped = false
  let timer: NodeJS.Timeout | undefined
  let client: pg.Client | undefined
  let end: (() => Promise<void>) | undefined
  let trying: Promise<void> = Promise.resolve()

  const tryLater = () => {
    if (stopped) return
    timer = setTimeout(() => {
      trying = attempt()
    }, retryMs)
  }

  async function attempt(): Promise<void> {
    const mine = new pg.Client({
      connectionString: databaseUrl,
      application_name: 'coalhand duty',
      keepAlive: true,
    })
    client = mine
    mine.on('error', (error) => log.warn({ err: error }, 'The connection of the jobs was lost'))
    mine.on('end', () => void lost(mine))
    mine.on('notification', (message) => heard(message.payload ?? ''))
    try {
      await mine.connect()
      await until(
        () => stopped || isTaken(mine),
        retryMs,
        () => stopped,
      )
      if (stopped) return
      await mine.query(`listen ${channel}`)
      log.debug('This process runs the jobs')
      end = begin()
    } catch (error) {
      if (!stopped) log.warn({ err: error }, 'The jobs wait for the database')
      await mine.end().catch(() => undefined)
      await lost(mine)
    }
  }

  /** The lock went with the connection: another process may be on duty by now. */
  async function lost(which: pg.Client): Promise<void> {
    if (which !== client) return
    client = undefined
    const ending = end
    end = undefined
    await ending?.()
    tryLater()
  }

  trying = attempt()
  return {
    isOn: () => end !== undefined,
    async stop() {
      stopped = true
      clearTimeout(timer)
      const ending = end
      end = undefined
      await ending?.()
      const last = client
      client = undefined
      await last?.end().catch(() => undefined)
      await trying
    },
  }
}

async function isTaken(client: pg.Client): Promise<boolean> {
  const answer = await client.query<{ taken: boolean }>(
    'select pg_try_advisory_lock($1, $2) as taken',
    dutyLock,
  )
  return answer.rows[0]?.taken === true
}

async function until(
  condition: () => boolean | Promise<boolean>,
  pauseMs: number,
  isOver: () => boolean,
): Promise<void> {
  while (!(await condition())) {
    // Short steps, so that a stop is not waited for.
    for (let waited = 0; waited < pauseMs && !isOver(); waited += 100) {
      await new Promise((resolve) => setTimeout(resolve, 100))
    }
  }
}
