import { pino } from 'pino'
import { startWorkerGroup } from '../../server/jobs/worker-group.ts'

/** A process that takes a job of learning and never ends it, until it is killed. Its argument: the database. */
const [databaseUrl = ''] = process.argv.slice(2)

startWorkerGroup({
  name: 'endless',
  databaseUrl,
  log: pino({ level: 'warn' }),
  tasks: { learning: () => new Promise<void>(() => undefined) },
  hands: 1,
  presenceLock: 7266,
})
