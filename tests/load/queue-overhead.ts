import { performance } from 'node:perf_hooks'
import { pino } from 'pino'
import { openDatabase } from '../../server/db/database.ts'
import { jobsRepository } from '../../server/features/jobs/service.ts'
import { startWorkerGroup } from '../../server/jobs/worker-group.ts'
import { childrensCpuSeconds } from './cpu-time.ts'
import { startScratchPostgres } from './scratch-postgres.ts'

/**
 * What the queue itself costs: rounds of 200 forecasts that do nothing but what surrounds each of them, and what the
 * same workers cost when there is nothing to do. Run with `node --import tsx tests/load/queue-overhead.ts`.
 */
const pieces = Array.from({ length: 200 }, (_, index) => index + 1)
const rounds = 20
const idleMs = 20_000

const postgres = await startScratchPostgres()
const db = openDatabase(postgres.url, { max: 4 })
const queue = jobsRepository(db)
let done = 0
let isRoundDone: (() => void) | undefined
const tasks = {
  forecast: async (_: unknown, { job }: { job: { id: string } }) => {
    await queue.isBusy(job.id, 'forecast', 1)
    done += 1
    if (done % pieces.length === 0) isRoundDone?.()
  },
}
const common = { databaseUrl: postgres.url, log: pino({ level: 'warn' }), presenceLock: 1 }
const groups = [
  startWorkerGroup({ ...common, name: 'forecasts', tasks, hands: 2 }),
  startWorkerGroup({ ...common, name: 'chores', tasks: { learning: () => undefined }, hands: 2 }),
]

async function round(): Promise<void> {
  const ended = new Promise<void>((resolve) => {
    isRoundDone = resolve
  })
  await queue.addForecasts(pieces, 0)
  await ended
}

/** CPU time of this process and of PostgreSQL over a piece of work, and how long it took, ms. */
async function cost(work: () => Promise<unknown>) {
  const [begun, own, theirs] = [performance.now(), process.cpuUsage(), childrensCpuSeconds(postgres.pid)]
  await work()
  const { user, system } = process.cpuUsage(own)
  return {
    tookMs: performance.now() - begun,
    ownMs: (user + system) / 1000,
    postgresMs: (childrensCpuSeconds(postgres.pid) - theirs) * 1000,
  }
}

await round()
const busy = await cost(async () => {
  for (let index = 0; index < rounds; index += 1) await round()
})
// Connections that were needed for the rounds alone have closed by then, and their times do not count backwards.
await new Promise((resolve) => setTimeout(resolve, 70_000))
const idle = await cost(() => new Promise((resolve) => setTimeout(resolve, idleMs)))
const jobs = rounds * pieces.length
const line = (name: string, { ownMs, postgresMs }: typeof busy, per: number, unit: string) =>
  console.log(
    `${name}: ${(ownMs / per).toFixed(2)} ms of CPU here and ${(postgresMs / per).toFixed(2)} in PostgreSQL ${unit}`,
  )
console.log(`${jobs} jobs in ${(busy.tookMs / 1000).toFixed(1)} s`)
line('A job', busy, jobs, 'each')
line('Nothing to do', idle, idle.tookMs / 1000, 'a second')
const aMinute = (busy.ownMs + busy.postgresMs) / rounds + ((idle.ownMs + idle.postgresMs) / idleMs) * 60_000
console.log(`200 pieces a minute: ${((aMinute / 60_000) * 100).toFixed(2)} % of a core`)

await Promise.all(groups.map((group) => group.stop()))
await db.destroy()
await postgres.remove()
