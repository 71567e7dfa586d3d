import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { readingEndpoints, type Trace } from '#shared/contract/reading.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { seededRandom } from '#shared/domain/random.ts'
import { celsiusFromThermistor } from '#shared/domain/steinhart-hart.ts'
import { down, up } from '../../migrations/0006_readings_15m.ts'
import { rollUpLock } from '../../server/history/roll-up-lock.ts'
import { isDue, rollUpQuarters } from '../../server/history/roll-up-quarters.ts'
import { storeReadings, type ReadingRow } from '../../server/ingest/store-readings.ts'
import { openDatabase } from '../../server/db/database.ts'
import { ensurePartitions } from '../../server/db/partitions.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const minuteMs = 60_000
const hourMs = 60 * minuteMs
const dayMs = 24 * hourMs
const now = Date.UTC(2026, 10, 30, 4, 0)
const clock = settableClock(now)
const longAgo = now - 730 * dayMs
let test: TestServer
let channels: number[]

beforeAll(async () => {
  test = await startTestServer({ clock })
  channels = test.house.own.device.channelIds
  await ensurePartitions(test.db, longAgo, now)
})
afterAll(() => test.stop())
beforeEach(async () => {
  await test.db.raw('truncate readings, readings_1m, readings_15m, readings_due')
})

const row = (channelId: number, atMs: number, value: number): ReadingRow => ({
  ...{ channelId, atMs, value },
  receivedAtMs: atMs,
})

/** Quarters of which the roll-up says other than the readings, though they are not due: none when all is well. */
async function wrongQuarters(): Promise<unknown> {
  const answer: unknown = await test.db.raw(`
    with expected as (
      select channel_id, date_bin('15 minutes', at, '2000-01-01 00:00:00+00') as quarter, min(value) as low,
        max(value) as high, sum(value)::numeric(20, 6) as total, count(*)::int as count,
        (array_agg(value order by at desc))[1] as last, max(at) as last_at
      from readings group by 1, 2
    ), found as (
      select channel_id, quarter, low, high, total::numeric(20, 6), count, last, last_at from readings_15m
    ), wrong as (
      (table expected except table found) union all (table found except table expected)
    )
    select w.* from wrong w
    where not exists (select from readings_due d where d.channel_id = w.channel_id and d.quarter = w.quarter)`)
  return z.object({ rows: z.array(z.unknown()) }).parse(answer).rows
}
const dueCount = async () => Number((await test.db('readings_due').count())[0]?.['count'])

describe('the quarter-hour roll-up', () => {
  it('is right after readings that come in any order, late and again', async () => {
    const random = seededRandom(15)
    const rows = Array.from({ length: 4000 }, (_, index) =>
      row(
        1 + (index % 3),
        now - 2 * dayMs + Math.floor(random.uniform() * 2 * dayMs),
        Math.round(random.uniform() * 1000),
      ),
    )
    for (let at = 0; at < rows.length; at += 500) {
      await storeReadings(test.db, [...rows.slice(at, at + 500), ...rows.slice(0, 3)])
      if (at % 1000 === 0) expect((await rollUpQuarters(test.db, { nowMs: now })).left).toBe(false)
      expect(await wrongQuarters()).toEqual([])
    }
    await rollUpQuarters(test.db, { nowMs: now + hourMs })
    expect(await dueCount()).toBe(0)
    expect(await wrongQuarters()).toEqual([])
    expect(await rollUpQuarters(test.db, { nowMs: now + hourMs })).toEqual({ quarters: 0, left: false })
  })

  it('covers a database from before there was one', async () => {
    await storeReadings(test.db, [
      row(1, longAgo, 60),
      row(1, longAgo + minuteMs, 61),
      row(2, now - hourMs, 50),
    ])
    await down(test.db)
    await up(test.db)
    expect(await dueCount()).toBe(2)
    await rollUpQuarters(test.db, { nowMs: now })
    expect([await dueCount(), await wrongQuarters()]).toEqual([0, []])
  })

  it('leaves what is not over yet, and what comes late is due again', async () => {
    const quarter = now - 15 * minuteMs
    await storeReadings(test.db, [row(1, quarter, 60), row(1, quarter - 1, 50)])
    expect(await rollUpQuarters(test.db, { nowMs: now })).toEqual({ quarters: 1, left: false })
    expect(await isDue(test.db, quarter, now)).toBe(true)
    expect(await rollUpQuarters(test.db, { nowMs: now + 3 * minuteMs })).toEqual({ quarters: 1, left: false })
    expect(await isDue(test.db, longAgo, now)).toBe(false)
    // The same once more is no news.
    await storeReadings(test.db, [row(1, quarter, 60)])
    expect(await dueCount()).toBe(0)
    await storeReadings(test.db, [row(1, quarter + 1, 61)])
    expect(await isDue(test.db, quarter, now)).toBe(true)
  })

  it('misses nothing that is being stored while it counts', async () => {
    const at = now - hourMs
    const [first, second, third] = [row(1, at, 10), row(1, at + 1000, 20), row(1, at + 2000, 90)]
    const store = openDatabase(test.databaseUrl, { max: 2 })
    try {
      await storeReadings(store, [first])
      // Finds the note there and leaves none of its own; not committed yet.
      const open = await store.transaction()
      await storeReadings(open, [second])
      expect(await rollUpQuarters(test.db, { nowMs: now })).toEqual({ quarters: 0, left: true })
      expect(await dueCount()).toBe(1)
      await open.commit()
      expect(await rollUpQuarters(test.db, { nowMs: now })).toEqual({ quarters: 1, left: false })
      expect(await test.db('readings_15m').select('count', 'high')).toEqual([{ count: 2, high: 20 }])
      // The other way round: the roll-up holds the lock, has struck the note, and commits while the next one waits.
      await storeReadings(store, [row(1, at + 1500, 30)])
      const counting = await test.db.transaction()
      await counting.raw(`select pg_advisory_xact_lock(${rollUpLock})`)
      const storing = storeReadings(store, [third])
      await expect.poll(waiting).toBe(1)
      await counting('readings_due').delete()
      await counting.commit()
      await storing
      expect(await dueCount()).toBe(1)
      await rollUpQuarters(test.db, { nowMs: now })
      expect(await test.db('readings_15m').select('count', 'high')).toEqual([{ count: 4, high: 90 }])
    } finally {
      await store.destroy()
    }
  })

  it('is right when many store and several roll up at once', async () => {
    const store = openDatabase(test.databaseUrl, { max: 4 })
    let storing = true
    const random = seededRandom(3)
    const writers = [1, 2, 3].map(async (writer) => {
      for (let batch = 0; batch < 60; batch++) {
        const rows = Array.from({ length: 20 }, (_, index) =>
          row(
            1 + (index % 5),
            now - 3 * hourMs + Math.floor(random.uniform() * 2 * hourMs),
            writer * 1000 + batch,
          ),
        )
        await storeReadings(store, rows)
      }
    })
    const counters = [1, 2].map(async () => {
      let quarters = 0
      while (storing) quarters += (await rollUpQuarters(test.db, { nowMs: now })).quarters
      return quarters
    })
    try {
      await Promise.all(writers)
    } finally {
      storing = false
      await Promise.all(counters)
      await store.destroy()
    }
    expect(await wrongQuarters()).toEqual([])
    while ((await rollUpQuarters(test.db, { nowMs: now })).left);
    expect(await dueCount()).toBe(0)
    expect(await wrongQuarters()).toEqual([])
  })
})

async function waiting(): Promise<number> {
  return Number(
    (await test.db('pg_locks').where({ locktype: 'advisory', granted: false }).count())[0]?.['count'],
  )
}

const ask = async (query: Record<string, string | number>) =>
  readingEndpoints.traces.response.parse(
    (await test.as('manager').get('/api/sites/quarry-road/traces').query(query).expect(200)).body,
  ).traces
const span = (fromMs: number, toMs: number) => ({
  from: new Date(fromMs).toISOString(),
  to: new Date(toMs).toISOString(),
})
const drawn = (values: Trace['c']) => values.filter((value) => value !== null)

describe('a long span', () => {
  it('has at most so many points, with every extreme, whether rolled up or not', async () => {
    const channelId = channels[0] ?? 0
    // Two years, a reading each 20 minutes; a hundred days of silence; one reading far up and one far down.
    const rows: ReadingRow[] = []
    for (let at = longAgo; at < now; at += 20 * minuteMs) {
      const day = (at - longAgo) / dayMs
      if (day < 300 || day >= 400) rows.push(row(channelId, at + 7 * minuteMs, 100 + (day % 2)))
    }
    const [up, down] = [longAgo + 100 * dayMs, longAgo + 700 * dayMs]
    rows.push(row(channelId, up, 290), row(channelId, down, 4))
    for (let at = 0; at < rows.length; at += 5000) await storeReadings(test.db, rows.slice(at, at + 5000))

    const query = { ...span(longAgo + 5 * minuteMs, now), channels: channelId }
    const lines: (Trace | undefined)[] = []
    for (const points of [1500, 200, 10]) {
      const [trace] = await ask({ ...query, points })
      if (points === 1500) lines.push(trace)
      expect(trace?.at.length).toBeLessThanOrEqual(points)
      expect(Math.max(...drawn(trace?.high ?? []))).toBe(290)
      expect(Math.min(...drawn(trace?.low ?? []))).toBe(4)
      if (points < 200) continue
      const gaps = (trace?.c ?? []).flatMap((c, index) => (c === null ? [trace?.at[index] ?? 0] : []))
      expect(gaps).toHaveLength(1)
      expect(Math.abs((gaps[0] ?? 0) - (longAgo + 350 * dayMs))).toBeLessThan(8 * dayMs)
    }
    await rollUpQuarters(test.db, { nowMs: now + hourMs })
    expect(await dueCount()).toBe(0)
    // Now from the roll-up, then with a few quarters that are behind: the same line.
    lines.push((await ask({ ...query, points: 1500 }))[0])
    await storeReadings(test.db, [row(channelId, up + 1000, 100), row(channelId, now - minuteMs, 100)])
    const behind = (await ask({ ...query, points: 1500 }))[0]
    expect(await dueCount()).toBe(2)
    await rollUpQuarters(test.db, { nowMs: now + hourMs })
    const [ready] = await ask({ ...query, points: 1500 })
    expect(roughly(lines[1])).toEqual(roughly(lines[0]))
    expect(roughly(ready)).toEqual(roughly(behind))
    expect(ready?.c).not.toEqual(lines[1]?.c)
    await expect(ask({ ...query, points: 1501 })).rejects.toThrow('400')
  }, 60_000)

  it('of a thermistor is drawn in degrees, not from means of ohms', async () => {
    const channelId = channels[1] ?? 0
    const curve = { a: 1.10415912e-3, b: 2.38917947e-4, c: 6.93162653e-8 }
    const change = now - 20 * dayMs + 7 * minuteMs + 20_000
    await test
      .db('sensors')
      .where({ channel_id: channelId })
      .update({ during: test.db.raw('tstzrange(lower(during), ?)', [new Date(change)]) })
    await test.db('sensors').insert({
      ...{ channel_id: channelId, kind: 'thermistor', offset_c: 0.5 },
      ...{ coefficient_a: curve.a, coefficient_b: curve.b, coefficient_c: curve.c },
      during: test.db.raw('tstzrange(?, null)', [new Date(change)]),
    })
    test.server.services.deviceBook.invalidate()
    // Degrees until the change, ohms from it on, in the same minute and quarter of an hour: an hour of 0 °C, one of 50.
    const rows: ReadingRow[] = []
    for (let at = now - 40 * dayMs; at < now; at += 5 * minuteMs) {
      const other = Math.floor(at / hourMs) % 2 === 0
      rows.push(row(channelId, at, at < change ? (other ? 0 : 50) : other ? 32_128 : 3542))
    }
    rows.push(row(channelId, change - 1000, 25), row(channelId, change + 1000, 9814))
    for (let at = 0; at < rows.length; at += 5000) await storeReadings(test.db, rows.slice(at, at + 5000))
    const [cold, hot] = [32_128, 3542].map((ohm) => (celsiusFromThermistor(ohm, curve) ?? NaN) + 0.5)
    for (const isRolledUp of [false, true]) {
      if (isRolledUp) await rollUpQuarters(test.db, { nowMs: now + hourMs })
      const [trace] = await ask({ ...span(now - 40 * dayMs, now), channels: channelId, points: 200 })
      const after = trace?.at.findIndex((at) => at > change + 5 * hourMs) ?? 0
      expect(Math.max(...drawn(trace?.high ?? []))).toBeCloseTo(hot ?? NaN, 2)
      expect(Math.min(...drawn(trace?.low ?? []))).toBe(0)
      expect(Math.min(...drawn(trace?.low.slice(after) ?? []))).toBeCloseTo(cold ?? NaN, 2)
      // Five hours to a step, two or three of them hot; the mean of their ohms would be some 11 °C.
      const means = drawn(trace?.c.slice(after, -1) ?? [])
      expect(means.length).toBeGreaterThan(90)
      for (const c of means) expect(Math.abs(c - 25.5)).toBeLessThan(5.1)
    }
  })
})

/** Sums of many numbers differ in their last digits by their order. */
function roughly(trace: Trace | undefined) {
  return trace && { ...trace, c: trace.c.map((c) => (c === null ? null : Math.round(c * 10))) }
}
