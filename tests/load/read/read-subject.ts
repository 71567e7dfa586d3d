import { createServer } from 'node:http'
import type { AddressInfo } from 'node:net'
import { pino } from 'pino'
import { z } from 'zod'
import { readingEndpoints, type Trace } from '#shared/contract/reading.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../../server/compose.ts'
import { openDatabase } from '../../../server/db/database.ts'
import { migrateToLatest } from '../../../server/db/migrate.ts'
import { readingRepository } from '../../../server/features/readings/repository.ts'
import { rollUpQuarters } from '../../../server/history/roll-up-quarters.ts'
import { fillHistory, nightMs } from './fill-history.ts'
import { createAsker, timed, type Timings } from './timings.ts'

const dayMs = 24 * 3_600_000

export type ReadSubject = Awaited<ReturnType<typeof startReadSubject>>

/**
 * A server on a database of its own with so many readings, and what can be measured of it. The server runs in this
 * process, as `npm start` in production would compose it; times include the asker's own parsing.
 */
export async function startReadSubject(url: string, rows: number, timings: Timings) {
  await migrateToLatest(url)
  const db = openDatabase(url, { max: 2 })
  const endMs = Date.UTC(2026, 11, 1, 11)
  const history = await fillHistory(db, rows, endMs)
  const { house, channelIds, pieceIds } = history
  const server = composeServer({
    databaseUrl: url,
    log: pino({ level: 'silent' }),
    clock: settableClock(endMs),
    tokenKey: 'a key for measuring only, of no use elsewhere',
    build: 'bench',
    http: { host: '127.0.0.1', port: 0 },
  })
  const { httpPort } = await server.start()
  const token = server.services.sessions.issueAccessToken(house.people.owner.id)
  const ask = createAsker(httpPort, token)
  const bare = await startBareServer(url)
  const askBare = createAsker(bare.port, '')
  const repository = readingRepository(db)
  let turn = 0

  const traces = async (spanMs: number, channels: readonly number[], points: number): Promise<Trace[]> => {
    const span = `from=${new Date(endMs - spanMs).toISOString()}&to=${new Date(endMs).toISOString()}`
    const path = `/api/sites/${house.own.slug}/traces?${span}&channels=${channels.join(',')}&points=${points}`
    return readingEndpoints.traces.response.parse(await ask.get(path)).traces
  }

  return {
    history,
    db,
    /** A piece's fourteen hours, its own line and its pit's; another piece each time. */
    async pieceTrace(name: string) {
      const path = `/api/pieces/${pieceIds[turn++ % pieceIds.length]}/trace`
      const answer = await timed(timings, name, () => ask.get(path))
      const { core, pit } = readingEndpoints.ofPiece.response.parse(answer)
      expectPoints(path, core, nightMs / 60_000)
      expectPoints(path, pit, nightMs / 60_000)
    },
    async tonight(name: string) {
      await timed(timings, name, () => ask.get(`/api/sites/${house.own.slug}/tonight`))
    },
    async latest(name: string) {
      const found = await timed(timings, name, () => repository.latest(channelIds, endMs - 30 * dayMs))
      if (found.length !== channelIds.length) throw new Error(`${found.length} channels have a latest value`)
    },
    /** The pit that never goes out, over two years or what there is of them. */
    async longLine(name: string) {
      const [trace] = await timed(timings, name, () => traces(730 * dayMs, channelIds.slice(0, 1), 1500))
      // Almost twelve hours to a step.
      const least = Math.min(1300, history.nights * 13)
      if (!trace || trace.at.length > 1500 || trace.at.length < least)
        throw new Error(`A long line has ${trace?.at.length} points`)
    },
    async week(name: string) {
      await timed(timings, name, () => traces(7 * dayMs, channelIds.slice(0, 24), 1000))
    },
    async hour(name: string) {
      const found = await timed(timings, name, () => traces(3_600_000, channelIds.slice(0, 24), 1500))
      for (const trace of found) expectPoints('an hour', trace, 60)
    },
    /** `select 1` through Node's HTTP server and the same pool: what asking costs at all. */
    async nothing(name: string) {
      await timed(timings, name, () => askBare.get('/'))
    },
    /** What a chart of fourteen hours takes without roll-ups or server: two channels' readings by SQL. */
    async rawRows(name: string) {
      const fromMs = endMs - nightMs
      const own = [channelIds[turn++ % channelIds.length] ?? 0, channelIds[1] ?? 0]
      await timed(timings, name, () =>
        db('readings')
          .whereIn('channel_id', own)
          .where('at', '>=', new Date(fromMs))
          .orderBy('at')
          .select('at', 'value'),
      )
    },
    /** The newest night is rolled up again. @returns quarters a second */
    async rollUpRate(): Promise<number> {
      await db.raw(
        `insert into readings_due (channel_id, quarter) select channel_id, quarter from readings_15m
         where channel_id between ? and ? and quarter >= ? on conflict do nothing`,
        [channelIds[0], channelIds.at(-1), new Date(endMs - nightMs)].map((value) => value ?? 0),
      )
      const begun = performance.now()
      const { quarters } = await rollUpQuarters(db, { nowMs: endMs + 3_600_000 })
      return quarters / ((performance.now() - begun) / 1000)
    },
    async stop() {
      ask.close()
      askBare.close()
      await bare.stop()
      await server.stop()
      await db.destroy()
    },
  }
}

async function startBareServer(url: string) {
  const db = openDatabase(url, { max: 2 })
  const server = createServer((_, response) => {
    db.raw('select 1 as one').then(
      (answer: unknown) => response.end(JSON.stringify(One.parse(answer).rows)),
      (error: unknown) => response.writeHead(500).end(String(error)),
    )
  })
  await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve))
  const address: AddressInfo | string | null = server.address()
  return {
    port: typeof address === 'object' ? (address?.port ?? 0) : 0,
    async stop() {
      await new Promise((resolve) => server.close(resolve))
      await db.destroy()
    },
  }
}

const One = z.object({ rows: z.array(z.object({ one: z.int() })) })

function expectPoints(what: string, trace: Trace | null | undefined, count: number): void {
  // A probe's readings lie anywhere in their minutes: the last one may fall on the other side of the end.
  if (!trace || Math.abs(trace.at.length - count) > 2) {
    throw new Error(`${what} answered with ${trace?.at.length ?? 'no'} points instead of ${count}`)
  }
}
