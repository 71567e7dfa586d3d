// How fast readings come in: the whole path from a device's socket to the commit, beside what its parts do alone, all
// in one run. `npm run bench:ingest -- --seconds 5 --rounds 3`; `--only copy,one` measures only these.
// `--server='--import tsx server/main.ts'` starts the server another way than `npm start`.
import { mkdtemp, readFile, rm } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { parseArgs } from 'node:util'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { openDatabase } from '../../server/db/database.ts'
import { ensurePartitions, livePartitionSpan } from '../../server/db/partitions.ts'
import { childrensCpuSeconds, cpuSeconds } from './cpu-time.ts'
import { copyRate, empty, expectRows, insertRate } from './ingest/database-rates.ts'
import { createFigures } from './ingest/figures.ts'
import { makeLoadHouse } from './ingest/load-house.ts'
import { publishFromProcess, startBareBroker, startWholeServer } from './ingest/processes.ts'
import type { Load, LoadResult } from './ingest/raw-publisher.ts'
import { reportIngest } from './ingest/report.ts'
import { startScratchPostgres } from './scratch-postgres.ts'

const connections = 40
/** Messages without an acknowledgement a connection may have: the same for both brokers. */
const window = 250
const warmUpMs = 1500
const copiedRowsPerSecond = 100_000

const options = readOptions()
const start = options.server ?? (await startCommand())
const postgres = await startScratchPostgres()
const folder = await mkdtemp(join(tmpdir(), 'coalhand-bench-'))
const db = openDatabase(postgres.url, { max: 2 })
try {
  const missed = await measure()
  for (const floor of missed) console.log(`Floor missed: ${floor}`)
  process.exitCode = missed.length === 0 ? 0 : 1
} finally {
  await db.destroy()
  await postgres.remove()
  await rm(folder, { recursive: true, force: true })
}

async function measure(): Promise<string[]> {
  const { fromMs, toMs } = livePartitionSpan(systemClock.now())
  await ensurePartitions(db, fromMs, toMs)
  const devices = await makeLoadHouse(db, connections)
  const load = { devices, window, warmUpMs, measureMs: options.seconds * 1000 }
  const count = Math.round(options.seconds * copiedRowsPerSecond)
  const figures = createFigures()

  const bare = async (name: string, shape: Pick<Load, 'readings' | 'perSecond'>) => {
    const broker = await startBareBroker()
    const before = cpuSeconds(broker.pid)
    const result = await publishFromProcess({ ...load, ...shape, port: broker.port })
    figures.note(`${name} cpu`, ((cpuSeconds(broker.pid) - before) / result.sent) * 1e6)
    await broker.stop()
    noteResult(name, result, shape)
  }
  const whole = async (name: string, shape: Pick<Load, 'readings' | 'perSecond'>) => {
    await empty(db)
    const server = await startWholeServer({
      databaseUrl: postgres.url,
      dataDir: join(folder, 'data'),
      command: start.split(' '),
    })
    const before = { server: cpuSeconds(server.pid), database: childrensCpuSeconds(postgres.pid) }
    const result = await publishFromProcess({ ...load, ...shape, port: server.port })
    const after = { server: cpuSeconds(server.pid), database: childrensCpuSeconds(postgres.pid) }
    figures.note(`${name} cpu`, ((after.server - before.server) / result.sent) * 1e6)
    figures.note(`${name} database cpu`, ((after.database - before.database) / result.sent) * 1e6)
    // Acknowledged means stored: the rows are there now, before the server has any reason to hurry.
    await expectRows(db, result.sent * shape.readings)
    await server.stop()
    noteResult(name, result, shape)
  }
  const noteResult = (name: string, result: LoadResult, { readings, perSecond }: Partial<Load>) => {
    if (perSecond === 0) {
      figures.note(name, result.perSecond)
      figures.note(`${name} readings`, result.perSecond * (readings ?? 1))
    } else {
      figures.note(`${name} median`, result.medianMs)
      figures.note(`${name} p99`, result.p99Ms)
    }
  }

  const nowMs = systemClock.now()
  const parts: [string, () => Promise<void>][] = [
    [
      'copy',
      async () => figures.note('copy', await copyRate(db, { url: postgres.url, folder, count, nowMs })),
    ],
    ['insert', async () => figures.note('insert', await insertRate(db, { count, nowMs }))],
    ['six', () => whole('six', { readings: 6, perSecond: 0 })],
    ['bare', () => bare('bare', { readings: 1, perSecond: 0 })],
    ['one', () => whole('one', { readings: 1, perSecond: 0 })],
    ['1000', () => bare('bare at 1000', { readings: 1, perSecond: 1000 })],
    ['1000', () => whole('whole at 1000', { readings: 1, perSecond: 1000 })],
    ['10000', () => bare('bare at 10000', { readings: 1, perSecond: 10_000 })],
    ['10000', () => whole('whole at 10000', { readings: 1, perSecond: 10_000 })],
  ]
  for (let round = 1; round <= options.rounds; round++) {
    console.log(`Round ${round} of ${options.rounds}`)
    for (const [name, part] of parts) if (options.only?.includes(name) ?? true) await part()
  }
  return reportIngest(figures)
}

/** As `npm start` runs it. */
async function startCommand(): Promise<string> {
  const text = await readFile(new URL('../../package.json', import.meta.url), 'utf8')
  const { scripts } = z.object({ scripts: z.object({ start: z.string() }) }).parse(JSON.parse(text))
  return scripts.start.replace(/^node /, '')
}

function readOptions() {
  const text = { type: 'string' } as const
  const { values } = parseArgs({ options: { seconds: text, rounds: text, only: text, server: text } })
  return z
    .object({
      seconds: z.coerce.number().min(1).default(5),
      rounds: z.coerce.number().int().min(1).default(3),
      only: z
        .string()
        .transform((list) => list.split(','))
        .optional(),
      server: z.string().optional(),
    })
    .parse(values)
}
