import { compare } from 'bcryptjs'
import type { Knex } from 'knex'
import { pino } from 'pino'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { settableClock, systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../server/compose.ts'
import { openDatabase } from '../../server/db/database.ts'
import { backfillForecasts } from '../../server/demo/backfill-forecasts.ts'
import { houseState, seedDemo, type DemoSeedOptions } from '../../server/demo/seed-demo.ts'
import { startFleet } from '../../server/demo/start-fleet.ts'
import { demoPeople, demoSites } from '../../simulators/demo/house.ts'
import { freshDatabase, type FreshDatabase } from '../harness/postgres.ts'

const now = Date.parse('2026-12-01T05:12:30Z')

interface Seeded {
  database: FreshDatabase
  db: Knex
  options: DemoSeedOptions
}
async function openHouse(pastCount = 40): Promise<Seeded> {
  const database = await freshDatabase()
  const db = openDatabase(database.url, { max: 3 })
  const options = {
    db,
    clock: settableClock(now),
    seed: 7,
    password: 'a password for tests',
    deviceKey: 'a key for tests',
    log: () => undefined,
    passwordCost: 4,
    pastCount,
  }
  return { database, db, options }
}

let house: Seeded
beforeAll(async () => {
  house = await openHouse()
  expect(await houseState(house.db)).toBe('empty')
  expect(await seedDemo(house.options)).toBe(true)
})
afterAll(async () => {
  await house.db.destroy()
  await house.database.drop()
})

async function rows<T extends z.ZodType>(schema: T, sql: string, db = house.db): Promise<z.infer<T>[]> {
  const answer: unknown = await db.raw(sql)
  return z.object({ rows: z.array(schema) }).parse(answer).rows
}

const dumped = [
  'sites',
  'users',
  'site_roles',
  'cookers',
  'devices',
  'channels',
  'sensors',
  'recipes',
  'services',
]
const cooked = ['pieces', 'placements', 'probe_placements', 'events', 'readings', 'readings_1m']

/** Everything in the tables as one hash a table, but what is drawn by chance: the salt of the passwords. */
async function fingerprint(db: Knex): Promise<unknown> {
  const hashes: Record<string, unknown> = {}
  for (const table of [...dumped, ...cooked, 'device_secrets']) {
    const found = await rows(
      z.object({ hash: z.string().nullable(), count: z.number() }),
      `select md5(string_agg((to_jsonb(t) - 'password_hash')::text, '|' order by (to_jsonb(t) - 'password_hash')::text)) as hash,
              count(*)::int as count from ${table} t`,
      db,
    )
    hashes[table] = found[0]
  }
  return hashes
}

describe('the demo house', () => {
  it('stands as the scenario says', async () => {
    expect(await houseState(house.db)).toBe('demo')
    const sites = await rows(z.object({ slug: z.string() }), 'select slug from sites order by id')
    expect(sites.map((site) => site.slug)).toEqual(['quarry-road', 'mill-yard'])
    const cookers = await rows(z.object({ name: z.string() }), 'select name from cookers order by id')
    expect(cookers).toHaveLength(9)
    const people = await rows(z.object({ password_hash: z.string() }), 'select password_hash from users')
    expect(people).toHaveLength(demoPeople.length)
    expect(await compare('a password for tests', people[0]?.password_hash ?? '')).toBe(true)
  })

  it('has forty finished cooks, with readings, events and weights', async () => {
    const pieces = await rows(
      z.object({ stage: z.string(), weights: z.number(), minutes: z.number(), events: z.number() }),
      `select stage, num_nonnulls(trimmed_kg, cooked_kg, sliced_kg) as weights,
         (select count(*)::int from probe_placements pp join readings_1m m
            on m.channel_id = pp.channel_id and pp.during @> m.minute where pp.piece_id = p.id) as minutes,
         (select count(*)::int from events e where e.piece_id = p.id) as events
       from pieces p where stage = 'done'`,
    )
    expect(pieces).toHaveLength(40)
    for (const piece of pieces) {
      expect(piece.weights).toBe(3)
      expect(piece.minutes).toBeGreaterThan(200)
      expect(piece.events).toBeGreaterThan(5)
    }
  })

  it('has pieces in every part of a cook tonight, on at least five cookers', async () => {
    const pieces = await rows(
      z.object({ stage: z.string(), cured: z.boolean(), cooker: z.number().nullable() }),
      `select stage, cured, (select cooker_id from placements where piece_id = p.id and upper_inf(during)) as cooker
       from pieces p where stage <> 'done'`,
    )
    const stages = new Set(pieces.map((piece) => piece.stage))
    expect([...stages].sort()).toEqual(['cooking', 'holding', 'resting', 'wrapped'])
    expect(pieces.some((piece) => piece.cured)).toBe(true)
    expect(new Set(pieces.flatMap((piece) => piece.cooker ?? [])).size).toBeGreaterThanOrEqual(5)
  })

  it('reads every pit up to now', async () => {
    const pits = await rows(
      z.object({ newest: z.date() }),
      `select max(last_at) as newest from probe_placements pp join readings_1m m using (channel_id)
       where pp.role = 'pit' group by channel_id`,
    )
    expect(pits).toHaveLength(demoSites.flatMap((site) => site.cookers).length)
    for (const pit of pits) expect(now - pit.newest.getTime()).toBeLessThan(120_000)
    const [count] = await rows(
      z.object({ rolled: z.number(), raw: z.number() }),
      'select (select sum(count)::int from readings_1m) as rolled, (select count(*)::int from readings) as raw',
    )
    expect(count?.rolled).toBe(count?.raw)
    expect(count?.raw).toBeGreaterThan(80_000)
  })

  it('never has more pieces on a cooker than it takes', async () => {
    const crowded = await rows(
      z.object({ name: z.string() }),
      `select c.name from placements a join cookers c on c.id = a.cooker_id
       join placements b on b.cooker_id = a.cooker_id and b.during @> lower(a.during)
       group by c.id, a.id having count(*) > c.capacity`,
    )
    expect(crowded).toEqual([])
  })

  it('stays as it is when it is put in again', async () => {
    const before = await fingerprint(house.db)
    expect(await seedDemo(house.options)).toBe(false)
    expect(await fingerprint(house.db)).toEqual(before)
  })

  it('is the same from the same seed at the same moment', async () => {
    const other = await openHouse()
    try {
      await seedDemo(other.options)
      expect(await fingerprint(other.db)).toEqual(await fingerprint(house.db))
    } finally {
      await other.db.destroy()
      await other.database.drop()
    }
  }, 60_000)

  it('takes a new password and new device secrets when those beside it were lost', async () => {
    await seedDemo({ ...house.options, password: 'another one', deviceKey: 'another key' })
    const [person] = await rows(z.object({ password_hash: z.string() }), 'select password_hash from users')
    expect(await compare('another one', person?.password_hash ?? '')).toBe(true)
    const secrets = await rows(z.object({ count: z.number() }), 'select count(*)::int from device_secrets')
    expect(secrets[0]?.count).toBe(2 * demoSites.flatMap((site) => site.devices).length)
  })
})

it('somebody’s own house is left alone', async () => {
  const own = await openHouse(0)
  try {
    await own.db('sites').insert({ slug: 'own', name: 'Own', time_zone: 'UTC' })
    expect(await houseState(own.db)).toBe('own')
  } finally {
    await own.db.destroy()
    await own.database.drop()
  }
})

it('goes on live: devices report over MQTT, also after their process died, and its past gets forecasts', async () => {
  const database = await freshDatabase()
  const db = openDatabase(database.url, { max: 3 })
  const log = pino({ level: 'silent' })
  const secrets = { password: 'embers-for-tests', deviceKey: 'a key for tests' }
  await seedDemo({
    db,
    clock: systemClock,
    seed: 3,
    log: () => undefined,
    passwordCost: 4,
    pastCount: 2,
    ...secrets,
  })
  const server = composeServer({
    log,
    clock: systemClock,
    tokenKey: 'a key for tests only, of no use elsewhere',
    build: 'test',
    passwordCost: 4,
    http: { host: '127.0.0.1', port: 0 },
    mqtt: { host: '127.0.0.1', port: 0 },
    databaseUrl: database.url,
  })
  const { httpPort, mqttPort } = await server.start()
  const fleet = startFleet({
    mqttUrl: `mqtt://127.0.0.1:${mqttPort ?? 0}`,
    httpUrl: `http://127.0.0.1:${httpPort}`,
    seed: 3,
    log,
    ...secrets,
  })
  const { forecasts } = server.services
  const stopBackfill = backfillForecasts({ db, log, forecasts, before: systemClock.now() })
  /** Whether every pit of the restaurant was read after a moment. */
  const allReadAfter = async (moment: number) => {
    const { cookers, latest } = await server.services.tonight.ofSite('quarry-road')
    return cookers.every(({ pitChannelId }) =>
      latest.some(({ channelId, at }) => channelId === pitChannelId && Date.parse(at) > moment),
    )
  }
  try {
    await until(() => allReadAfter(systemClock.now() - 6000))
    const first = fleet.pid() ?? 0
    process.kill(first, 'SIGKILL')
    const killed = systemClock.now()
    await until(() => allReadAfter(killed + 1000))
    expect(fleet.pid()).not.toBe(first)
    const [piece] = await rows(z.object({ id: z.number() }), `select id from pieces where stage = 'done'`, db)
    await until(async () => (await forecasts.list(piece?.id ?? 0, { limit: 500 })).items.length > 10)
    const [last, ...earlier] = (await forecasts.list(piece?.id ?? 0, { limit: 500 })).items
    expect(last).toMatchObject({ phase: 'done', pullReason: 'already-pulled' })
    expect(earlier.filter((one) => one.pull !== null).length).toBeGreaterThan(5)
    for (const { madeAt } of earlier) expect(Date.parse(madeAt) % (15 * 60_000)).toBe(0)
  } finally {
    await Promise.all([fleet.stop(), stopBackfill()])
    await server.stop()
    await db.destroy()
    await database.drop()
  }
  expect(() => process.kill(fleet.pid() ?? 0, 0)).toThrow('ESRCH')
}, 90_000)

async function until(test: () => Promise<boolean>): Promise<void> {
  const deadline = systemClock.now() + 40_000
  while (systemClock.now() < deadline) {
    if (await test()) return
    await new Promise((resolve) => setTimeout(resolve, 200))
  }
  throw new Error('Waited in vain.')
}
