import { randomUUID } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { PieceForecast, type LatestForecast } from '#shared/contract/forecast.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { Piece, PieceDetail } from '#shared/contract/piece.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer, type ComposedServer } from '../../server/compose.ts'
import { pino } from 'pino'
import { createForecastPool } from '../../server/jobs/forecast-pool.ts'
import { createForecastRunner } from '../../server/jobs/forecast-runner.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const minute = 60_000
/** So that nothing within a test is a regular round, but for the first. */
const jobs = { byTheClock: false }

let server: TestServer
const heard: LatestForecast[] = []
beforeAll(async () => {
  server = await startTestServer({ jobs })
  listenTo(server.server)
})
afterAll(() => server.stop())

function listenTo(composed: ComposedServer): void {
  composed.services.bus.subscribe((_, changes) => heard.push(...(changes.forecasts ?? [])))
}

const ago = (minutes: number) => new Date(systemClock.now() - minutes * minute).toISOString()
const cooker = () => server.house.own.cookers[0]?.id ?? 0
const channel = (index: number) => server.house.own.device.channelIds[index] ?? 0

async function until<T>(what: string, look: () => T | undefined | Promise<T | undefined>): Promise<T> {
  const deadline = systemClock.now() + 15_000
  while (systemClock.now() < deadline) {
    const found = await look()
    if (found !== undefined) return found
    await new Promise((resolve) => setTimeout(resolve, 50))
  }
  throw new Error(`Waited in vain for ${what}.`)
}
const forecastOf = (piece: Piece, test: (forecast: LatestForecast) => boolean = () => true) =>
  until(`a forecast of ${piece.label}`, () => heard.findLast((one) => one.pieceId === piece.id && test(one)))

async function start(change: Record<string, unknown>): Promise<Piece> {
  const answer = await server
    .as('crew')
    .post('/api/sites/quarry-road/pieces')
    .send({
      eventId: randomUUID(),
      recipeId: server.house.recipes[0]?.id,
      cookerId: cooker(),
      rawKg: 6.2,
      onAt: ago(360),
      ...change,
    })
  expect(answer.status, answer.text).toBe(201)
  return Piece.parse(answer.body)
}

/** Six hours of a pit at 121 °C and a core that comes up from 4 °C like a warming body: a plausible brisket. */
async function sendCook(): Promise<void> {
  const records = Array.from({ length: 361 }, (_, index) => {
    const bt = Math.floor(systemClock.now() / 1000) - (360 - index) * 60
    const hours = index / 60
    const core = 4 + 66 * (1 - Math.exp(-((hours / 3) ** 1.4)))
    return [
      { n: '1', u: 'Cel', v: 121 + Math.sin(index / 9) * 3, t: bt },
      { n: '2', u: 'Cel', v: Math.round(core * 10) / 10, t: bt },
    ]
  }).flat()
  const { username, secret } = server.house.own.device
  await server.api.post('/api/readings').auth(username, secret).send(records).expect(200)
}

async function log(piece: Piece, fact: object, happenedAt = ago(0)): Promise<void> {
  const answer = await server
    .as('crew')
    .post(`/api/pieces/${piece.id}/events`)
    .send({ id: randomUUID(), happenedAt, fact })
  expect(answer.status, answer.text).toBe(201)
}

describe('forecasts', () => {
  let piece: Piece
  beforeAll(async () => {
    await server
      .as('lead')
      .put(`/api/cookers/${cooker()}/probe`)
      .send({ channelId: channel(0) })
      .expect(200)
    // The pit has been read all along; the API places a probe from now on only.
    await server.db('probe_placements').update({ during: '[2020-01-01,)' })
    await sendCook()
    piece = await start({ label: 'N1', channelId: channel(1) })
  })

  it('are made at once when a piece goes on, kept and told to watchers', async () => {
    const forecast = await forecastOf(piece)
    expect(['rise', 'stall']).toContain(forecast.phase)
    for (const reach of [forecast.wrap, forecast.pull]) {
      const moments =
        reach && [reach.p10, reach.p25, reach.p50, reach.p75, reach.p90].map((at) => Date.parse(at))
      expect(moments).not.toBeNull()
      expect(moments).toEqual([...(moments ?? [])].sort((a, b) => a - b))
      expect(moments?.[0]).toBeGreaterThan(systemClock.now() - minute)
    }
    expect(forecast.fan.length).toBeGreaterThan(5)
    expect(forecast.pullMovedMin).toBeNull()
    const detail = PieceDetail.parse((await server.as('crew').get(`/api/pieces/${piece.id}`)).body)
    expect(detail.forecast).toEqual(forecast)
  })

  it('are made again at once when something is logged', async () => {
    const before = await forecastOf(piece)
    await log(piece, { kind: 'wrap', method: 'foil' })
    const after = await forecastOf(piece, (one) => one.phase === 'wrapped')
    expect(after.madeAt > before.madeAt).toBe(true)
    const sooner = Date.parse(before.pull?.p50 ?? '') - Date.parse(after.pull?.p50 ?? '')
    expect(sooner, 'a wrap in foil brings the pull nearer').toBeGreaterThan(0)
  })

  it('can be read as they were made, newest first', async () => {
    const List = z.object({ items: z.array(PieceForecast), nextCursor: z.string().nullable() })
    const get = async (query: string) =>
      List.parse((await server.as('crew').get(`/api/pieces/${piece.id}/forecasts${query}`).expect(200)).body)
    const all = (await get('')).items
    expect(all.length).toBeGreaterThanOrEqual(2)
    expect(all.map((one) => one.madeAt)).toEqual(
      all
        .map((one) => one.madeAt)
        .sort()
        .reverse(),
    )
    const first = await get('?limit=1')
    const second = await get(`?limit=1&cursor=${first.nextCursor ?? ''}`)
    expect([...first.items, ...second.items]).toEqual(all.slice(0, 2))
    await server.as('crew').get(`/api/pieces/${piece.id}/forecasts?cursor=nonsense`).expect(400)
  })

  it('say how far the pull moved in an hour', async () => {
    const present = await forecastOf(piece, (one) => one.pull !== null)
    const hourAgo = Date.parse(present.madeAt) - 62 * minute
    const shift = (instant: string) => new Date(Date.parse(instant) - 25 * minute).toISOString()
    const pull = present.pull
    if (!pull) throw new Error('There is a pull.')
    await server.server.services.forecasts.keepPast([
      {
        ...PieceForecast.parse(present),
        madeAt: new Date(hourAgo).toISOString(),
        pull: {
          p10: shift(pull.p10),
          p25: shift(pull.p25),
          p50: shift(pull.p50),
          p75: shift(pull.p75),
          p90: shift(pull.p90),
        },
        model: 'test',
      },
    ])
    const [latest] = await server.server.services.forecasts.latestOf([piece.id])
    expect(latest?.pullMovedMin).toBe(25)
  })

  it('say why not for a piece without a probe', async () => {
    const bare = await start({ label: 'bare' })
    expect(await forecastOf(bare)).toMatchObject({
      wrap: null,
      pull: null,
      wrapReason: 'no-probe',
      pullReason: 'no-probe',
      fan: [],
    })
    await log(bare, { kind: 'sliced' })
  })

  it('end with the pull, and go on when it is taken back', async () => {
    await log(piece, { kind: 'pull', by: 'feel' })
    expect(await forecastOf(piece, (one) => one.pullReason === 'already-pulled')).toMatchObject({
      phase: 'done',
      pull: null,
      fan: [],
    })
    const { events } = PieceDetail.parse((await server.as('crew').get(`/api/pieces/${piece.id}`)).body)
    heard.length = 0
    await server
      .as('crew')
      .post(`/api/pieces/${piece.id}/events`)
      .send({
        id: randomUUID(),
        happenedAt: ago(0),
        fact: { kind: 'withdrawn' },
        correctsId: events.find((event) => event.fact.kind === 'pull')?.id,
      })
      .expect(201)
    expect((await forecastOf(piece, (one) => one.pull !== null)).phase).toBe('wrapped')
  })

  it('thin out to one a quarter of an hour', async () => {
    const { forecasts } = server.server.services
    const base = Date.parse('2026-01-05T00:00:00Z')
    const like = PieceForecast.parse(await forecastOf(piece))
    const at = [0, 1, 14, 15, 29.5, 30, 47].map((minutes) => new Date(base + minutes * minute).toISOString())
    await forecasts.keepPast(at.map((madeAt) => ({ ...like, madeAt, model: 'test' })))
    expect(await forecasts.thin(base, base + 60 * minute)).toBe(3)
    const old = (await forecasts.list(piece.id, { limit: 100 })).items.filter((one) => one.madeAt < '2026-02')
    expect(old.map((one) => (Date.parse(one.madeAt) - base) / minute)).toEqual([47, 30, 29.5, 14])
  })
})

describe('trouble', () => {
  it('with a worker that is late costs that forecast only, and is over the next time', async () => {
    const piece = await start({ label: 'late', channelId: channel(2) })
    await forecastOf(piece)
    const { forecasts } = server.server.services
    const made: LatestForecast[] = []
    const common = {
      clock: systemClock,
      cooks: forecasts.cooks,
      forecasts,
      house: () => null,
      publish: (_: string, changes: LiveChanges) => made.push(...(changes.forecasts ?? [])),
    }
    const pool = createForecastPool({ withinMs: 1 })
    await expect(createForecastRunner({ ...common, pool }).run(piece.id)).rejects.toThrow(/abort/i)
    expect(made).toEqual([])
    await pool.stop()

    const patient = createForecastPool()
    const next = createForecastRunner({ ...common, pool: patient })
    await next.run(piece.id)
    expect(made.map((one) => one.pieceId)).toEqual([piece.id])
    await patient.stop()
  })

  it('with the connections of the jobs passes', async () => {
    const killed = await server
      .db('pg_stat_activity')
      .whereRaw(`application_name = 'coalhand jobs' and datname = current_database()`)
      .select(server.db.raw('pg_terminate_backend(pid)'))
    expect(killed.length).toBeGreaterThan(0)
    const piece = await start({ label: 'after', channelId: channel(3) })
    await forecastOf(piece)
  })
})

describe('of two server processes', () => {
  it('either makes forecasts, and one goes on when the other goes', async () => {
    const second = composeServer({
      log: pino({ level: 'silent' }),
      tokenKey: 'a key for tests only, of no use elsewhere',
      build: 'second',
      http: { host: '127.0.0.1', port: 0 },
      databaseUrl: server.databaseUrl,
      clock: systemClock,
      jobs,
    })
    listenTo(second)
    const { httpPort } = await second.start()
    try {
      await server.server.stop()
      heard.length = 0
      const asked = await fetch(`http://127.0.0.1:${httpPort}/api/jobs/forecast/run`, {
        method: 'POST',
        headers: { authorization: `Bearer ${server.tokenOf('engineer')}` },
      })
      expect(asked.status).toBe(204)
      await until('the second to forecast', () => heard.at(0))
    } finally {
      await second.stop()
    }
  })
})
