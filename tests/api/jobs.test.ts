import { spawn } from 'node:child_process'
import { once } from 'node:events'
import { fileURLToPath } from 'node:url'
import { pino } from 'pino'
import supertest from 'supertest'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import { z } from 'zod'
import { Health } from '#shared/contract/health.ts'
import { jobEndpoints } from '#shared/contract/job.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../server/compose.ts'
import { jobsRepository } from '../../server/features/jobs/service.ts'
import { startJobs } from '../../server/jobs/start-jobs.ts'
import { cuttableProxy } from '../harness/cuttable-proxy.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { createLatePool } from './late-pool.ts'
import { startCook } from './start-cook.ts'

type Listed = z.infer<typeof jobEndpoints.list.response>
const list = async (server: TestServer, role: 'engineer' | 'stranger' = 'engineer'): Promise<Listed> =>
  jobEndpoints.list.response.parse((await server.as(role).get('/api/jobs').expect(200)).body)
const ofKind = async (server: TestServer, kind: string) =>
  (await list(server)).kinds.find((one) => one.kind === kind)
const healthOf = async (server: TestServer) => Health.parse((await server.api.get('/api/health')).body)
const run = (server: TestServer, kind: string) =>
  server.as('engineer').post(`/api/jobs/${kind}/run`).expect(204)
const patient = { timeout: 15_000, interval: 50 }

/** How many forecasts each piece has. */
async function forecastsOf(server: TestServer, pieces: readonly number[]): Promise<number[]> {
  const rows = z
    .array(z.object({ piece_id: z.number(), count: z.number() }))
    .parse(await server.db('forecasts').groupBy('piece_id').select('piece_id').count())
  return pieces.map((id) => rows.find((row) => row.piece_id === id)?.count ?? 0)
}

describe('a server’s jobs', () => {
  let server: TestServer
  beforeAll(async () => {
    server = await startTestServer({ jobs: { byTheClock: false } })
  })
  afterAll(() => server.stop())

  it('are listed by kind, with when they ran and run next', async () => {
    await expect.poll(() => ofKind(server, 'forecast-round'), patient).toMatchObject({ runsLastHour: 1 })
    const { kinds, failing } = await list(server)
    expect(failing).toEqual([])
    const round = kinds.find(({ kind }) => kind === 'forecast-round')
    expect(Date.parse(round?.lastRunAt ?? '')).toBeGreaterThan(systemClock.now() - 60_000)
    const next = Date.parse(round?.nextRunAt ?? '') - systemClock.now()
    expect(next).toBeGreaterThan(-1000)
    expect(next).toBeLessThanOrEqual(60_000)
    // Nobody has asked for the others, and nothing is made up.
    expect(kinds.find(({ kind }) => kind === 'thinning')).toMatchObject({ lastRunAt: null, lastRunMs: null })
  })

  it('make a forecast within two seconds of an event, and hold it nowhere before the event is stored', async () => {
    const pieceId = await startCook(server, 'N1')
    const begun = systemClock.now()
    await expect.poll(() => forecastsOf(server, [pieceId]), { timeout: 2000, interval: 20 }).not.toEqual([0])
    expect(systemClock.now() - begun).toBeLessThan(2000)
    // An event that is rolled back asks for nothing.
    const asked = server.db.transaction(async (trx) => {
      await jobsRepository(trx).addForecasts([pieceId], -10)
      throw new Error('taken back')
    })
    await expect(asked).rejects.toThrow('taken back')
    expect((await ofKind(server, 'forecast'))?.waiting).toBe(0)
  })

  it('can be run now, and twice without harm', async () => {
    const partitions = () =>
      server.db('pg_inherits').whereRaw(`inhparent = 'readings'::regclass`).count({ count: '*' })
    const before = await partitions()
    for (const kind of ['roll-ups', 'partitions', 'retention', 'thinning', 'tidying', 'learning']) {
      for (const times of [1, 2]) {
        await run(server, kind)
        await expect.poll(() => ofKind(server, kind), patient).toMatchObject({ runsLastHour: times })
      }
      expect(await ofKind(server, kind)).toMatchObject({ failing: 0, failedLastHour: 0 })
    }
    expect(await partitions()).toEqual(before)
    expect(await healthOf(server)).toMatchObject({
      jobs: { ok: true, detail: 'all done in time', failing: 0 },
    })
  })

  it('wait once a piece, however often they are asked for', async () => {
    const quiet = await startTestServer()
    const pieceId = await startCook(quiet, 'N2')
    for (let times = 0; times < 5; times += 1) await jobsRepository(quiet.db).addForecasts([pieceId], 0)
    expect((await ofKind(quiet, 'forecast'))?.waiting).toBe(1)
    expect((await healthOf(quiet)).jobs).toMatchObject({
      ok: true,
      detail: 'not run by this process',
      waiting: 1,
    })
    await quiet.stop()
  })

  it('are told who may not see them', async () => {
    await server.as('lead').get('/api/jobs').expect(403)
    await server.as('crew').post('/api/jobs/learning/run').expect(403)
    await server.as('engineer').post('/api/jobs/no-such-kind/run').expect(400)
    await server.as('engineer').post('/api/jobs/failing/1/retry').expect(404)
    await server.as('engineer').delete('/api/jobs/failing/1').expect(404)
  })
})

describe('a job that fails', () => {
  let server: TestServer
  /** Whether the worker threads get less time than any forecast takes. */
  let isLate = true
  beforeAll(async () => {
    server = await startTestServer({
      jobs: {
        byTheClock: false,
        makePool: () => createLatePool(() => isLate),
      },
    })
  })
  afterAll(() => server.stop())

  it('is told with its error by health and list, tried again on request, and gone once it works', async () => {
    const pieceId = await startCook(server, 'late')
    await expect
      .poll(() => healthOf(server), patient)
      .toMatchObject({
        ok: false,
        forecast: { ok: false, detail: '1 of 1 could not be forecast' },
        jobs: { ok: false, failing: 1 },
      })
    const [failing] = (await list(server)).failing
    expect(failing).toMatchObject({
      kind: 'forecast',
      piece: { id: pieceId, label: 'late', site: 'quarry-road' },
      error: expect.stringMatching(/abort/i) as unknown,
      maxAttempts: 25,
    })
    expect(failing?.attempts).toBeGreaterThan(0)
    await expect
      .poll(async () => (await ofKind(server, 'forecast'))?.failedLastHour, patient)
      .toBeGreaterThan(0)
    // To the engineer of another site it is a job, not a piece.
    expect((await list(server, 'stranger')).failing).toMatchObject([{ kind: 'forecast', piece: null }])

    isLate = false
    await server.as('engineer').post(`/api/jobs/failing/${failing?.id}/retry`).expect(204)
    await expect.poll(() => forecastsOf(server, [pieceId]), { timeout: 3000 }).toEqual([1])
    await expect
      .poll(() => healthOf(server), patient)
      .toMatchObject({ forecast: { ok: true, detail: '1 piece forecast' }, jobs: { ok: true, failing: 0 } })
  })

  it('can be given up', async () => {
    isLate = true
    await startCook(server, 'hopeless', 4)
    await expect.poll(async () => (await list(server)).failing.length, patient).toBeGreaterThan(0)
    // A try may be under way: then it cannot be struck.
    await expect
      .poll(async () => {
        const [failing] = (await list(server)).failing
        return (await server.as('owner').delete(`/api/jobs/failing/${failing?.id}`)).status
      }, patient)
      .toBe(204)
    await expect.poll(async () => (await list(server)).failing, patient).toEqual([])
  })
})

describe('two server processes on one database', () => {
  it('forecast every piece once a round between them', async () => {
    const first = await startTestServer({ jobs: { byTheClock: false } })
    const second = composeServer({
      log: pino({ level: 'silent' }),
      tokenKey: 'a key for tests only, of no use elsewhere',
      build: 'second',
      http: { host: '127.0.0.1', port: 0 },
      databaseUrl: first.databaseUrl,
      clock: systemClock,
      jobs: { byTheClock: false },
    })
    const told = { first: 0, second: 0 }
    first.server.services.bus.subscribe((_, { forecasts = [] }) => (told.first += forecasts.length))
    second.services.bus.subscribe((_, { forecasts = [] }) => (told.second += forecasts.length))
    await second.start()
    try {
      await first.db('cookers').update({ capacity: 12 })
      const pieces: number[] = []
      for (let index = 0; index < 12; index += 1) pieces.push(await startCook(first, `N${index}`, null))
      const isQuiet = async () => {
        const [round, forecast] = [await ofKind(first, 'forecast-round'), await ofKind(first, 'forecast')]
        return [round, forecast].every((kind) => kind?.waiting === 0 && kind.running === 0)
      }
      await expect.poll(isQuiet, patient).toBe(true)
      const before = await forecastsOf(first, pieces)
      told.first = told.second = 0
      await run(first, 'forecast')
      await expect.poll(() => forecastsOf(first, pieces), patient).toEqual(before.map((count) => count + 1))
      await expect.poll(isQuiet, patient).toBe(true)
      expect(await forecastsOf(first, pieces)).toEqual(before.map((count) => count + 1))
      expect(told.first + told.second).toBe(pieces.length)
    } finally {
      await second.stop()
      await first.stop()
    }
  })
})

describe('a process that is killed at work', () => {
  it('keeps its job while it lives, and another does it once it is dead', async () => {
    const server = await startTestServer()
    const queue = jobsRepository(server.db)
    await queue.add('learning')
    const file = fileURLToPath(new URL('endless-worker.ts', import.meta.url))
    const worker = spawn(process.execPath, ['--import', 'tsx', file, server.databaseUrl], {
      stdio: 'inherit',
    })
    const dead = once(worker, 'exit')
    await expect.poll(() => ofKind(server, 'learning'), patient).toMatchObject({ running: 1, waiting: 0 })
    const presence = () =>
      server
        .db('pg_locks')
        .where({ locktype: 'advisory', classid: 7266, granted: true })
        .count({ count: '*' })
    await expect.poll(presence, patient).toEqual([{ count: 1 }])
    expect(await queue.releaseDead(7266, 0)).toBe(0)
    expect(await ofKind(server, 'learning')).toMatchObject({ running: 1 })

    worker.kill('SIGKILL')
    await dead
    const { services } = server.server
    const jobs = startJobs({
      ...{
        db: server.db,
        databaseUrl: server.databaseUrl,
        clock: systemClock,
        publish: services.bus.publish,
      },
      log: pino({ level: 'silent' }),
      forecasts: services.forecasts,
      byTheClock: false,
      sweep: { everyMs: 200, graceS: 0.1 },
    })
    await expect
      .poll(() => ofKind(server, 'learning'), patient)
      .toMatchObject({ running: 0, waiting: 0, failing: 0, runsLastHour: 1 })
    await jobs.stop()
    await server.stop()
  })
})

it('health says with its status when readings cannot be stored', async () => {
  const server = await startTestServer({ jobs: { byTheClock: false } })
  await supertest(server.url).get('/api/health').expect(200)
  await server.db.raw('alter table channels rename to hidden')
  const answer = await supertest(server.url).get('/api/health').expect(503)
  expect(Health.parse(answer.body)).toMatchObject({
    ok: false,
    database: { ok: false },
    ingest: { ok: true },
  })
  await server.stop()
})

describe('jobs while the database is away', () => {
  it('wait for it, with warnings and no error, and go on', async () => {
    const { hostname, port } = new URL(inject('postgresUrl'))
    const proxy = await cuttableProxy(hostname, Number(port))
    const levels: number[] = []
    const log = pino(
      { level: 'info' },
      { write: (line) => levels.push(z.object({ level: z.number() }).parse(JSON.parse(line)).level) },
    )
    const server = await startTestServer({ log, jobs: { byTheClock: false } }, { databasePort: proxy.port })
    const pieceId = await startCook(server, 'N1')
    await expect.poll(() => forecastsOf(server, [pieceId]), patient).not.toEqual([0])
    const [before = 0] = await forecastsOf(server, [pieceId])
    await proxy.cut()
    await jobsRepository(server.db).addForecasts([pieceId], 0)
    await expect.poll(async () => (await server.api.get('/api/health')).status, patient).toBe(503)
    const { forecast, jobs } = await healthOf(server)
    expect([forecast.ok, jobs.ok]).toEqual([false, false])
    expect(await forecastsOf(server, [pieceId])).toEqual([before])
    await proxy.mend()
    await expect.poll(() => forecastsOf(server, [pieceId]), patient).toEqual([before + 1])
    await expect.poll(async () => (await healthOf(server)).jobs, patient).toMatchObject({ ok: true })
    const error = 50
    expect(levels.filter((level) => level >= error)).toEqual([])
    await server.stop()
    await proxy.cut()
  })
})
