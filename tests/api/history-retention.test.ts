import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest'
import { readingEndpoints } from '#shared/contract/reading.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { ensurePartitions, listPartitions } from '../../server/db/partitions.ts'
import { dropOldPartitions, startOfKept } from '../../server/history/drop-old-partitions.ts'
import { rollUpQuarters } from '../../server/history/roll-up-quarters.ts'
import { storeReadings } from '../../server/ingest/store-readings.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const minuteMs = 60_000
const hourMs = 60 * minuteMs
const dayMs = 24 * hourMs
const weekMs = 7 * dayMs
/** A Tuesday. */
const now = Date.UTC(2026, 11, 1, 4, 0)
const clock = settableClock(now)
const kept = startOfKept(now, 13)
let test: TestServer
beforeAll(async () => {
  test = await startTestServer({ clock })
})
afterAll(() => test.stop())
beforeEach(async () => {
  await test.db.raw('truncate readings, readings_1m, readings_15m, readings_due, readings_given_up')
  await ensurePartitions(test.db, kept - 5 * weekMs, now)
})

const drop = (retentionMonths = 13) =>
  dropOldPartitions(test.db, { databaseUrl: test.databaseUrl, nowMs: now, retentionMonths })
const rows = async (table: string) => Number((await test.db(table).count())[0]?.['count'])
const store = (atMs: number, value = 100) => {
  const [channelId = 0] = test.house.own.device.channelIds
  return storeReadings(test.db, [{ channelId, atMs, value, receivedAtMs: atMs }])
}
const rollUp = () => rollUpQuarters(test.db, { nowMs: now })
const chart = async (fromMs: number, toMs: number) => {
  const [channel = 0] = test.house.own.device.channelIds
  const query = { from: new Date(fromMs).toISOString(), to: new Date(toMs).toISOString(), channels: channel }
  const answer = await test.as('manager').get('/api/sites/quarry-road/traces').query(query).expect(200)
  return readingEndpoints.traces.response.parse(answer.body).traces[0]
}

describe('partitions', () => {
  it('are made once, and cover their weeks without a gap', async () => {
    const found = await listPartitions(test.db)
    for (const [index, { fromMs }] of found.entries()) {
      expect(new Date(fromMs).getUTCDay()).toBe(1)
      if (index > 0) expect(fromMs).toBe(found[index - 1]?.toMs)
    }
    await Promise.all([1, 2, 3].map(() => ensurePartitions(test.db, now - weekMs, now + 9 * weekMs)))
    expect(await listPartitions(test.db)).toHaveLength(found.length + 7)
  })

  it('are made while somebody reads the whole table, and nobody waits for it', async () => {
    const backup = await test.db.transaction()
    try {
      await backup('readings').count()
      await ensurePartitions(test.db, now, now + 15 * weekMs)
      await store(now + 15 * weekMs)
    } finally {
      await backup.rollback()
    }
  })
})

describe('past the retention', () => {
  it('whole weeks are dropped, their roll-ups stay, and charts are drawn from them', async () => {
    const old = kept - 2 * weekMs
    await store(old, 90)
    await store(old + 20_000, 110)
    await store(kept + minuteMs)
    await rollUp()
    const before = (await listPartitions(test.db)).length
    expect(await chart(old - minuteMs, old + minuteMs)).toMatchObject({ c: [90, 110] })
    expect(await drop(0)).toEqual({ dropped: [], left: [] })
    const { dropped, left } = await drop()
    expect(left).toEqual([])
    expect(dropped.length).toBeGreaterThanOrEqual(4)
    const partitions = await listPartitions(test.db)
    expect(partitions).toHaveLength(before - dropped.length)
    // The week in which the retention begins stays as a whole.
    expect(partitions[0]?.toMs).toBeGreaterThan(kept)
    expect(partitions[0]?.fromMs).toBeLessThanOrEqual(kept)
    expect(await rows('readings')).toBe(1)
    expect([await rows('readings_1m'), await rows('readings_15m')]).toEqual([2, 2])
    expect(await chart(old - minuteMs, old + minuteMs)).toMatchObject({ c: [100], low: [90], high: [110] })
    expect((await chart(old - 20 * dayMs, old + minuteMs))?.high).toEqual([110])
    expect(await drop()).toEqual({ dropped: [], left: [] })
    // What comes for a week that is no more makes it anew, and it goes the same way.
    await ensurePartitions(test.db, old, old)
    await store(old + hourMs)
    await rollUp()
    expect((await drop()).dropped).toHaveLength(1)
  })

  it('a week stays while its minutes are not rolled up', async () => {
    const old = kept - 2 * weekMs
    await store(old)
    const first = await drop()
    expect(first.left).toHaveLength(1)
    expect(await rows('readings')).toBe(1)
    await rollUp()
    expect(await drop()).toEqual({ dropped: first.left, left: [] })
    expect(await rows('readings')).toBe(0)
  })

  it('goes on from wherever it ended', async () => {
    const [first, second] = await listPartitions(test.db)
    if (!first || !second) throw new Error('no partitions')
    // Ended after the detaching, before the drop; and before anything was done.
    await test.db('readings_given_up').insert(
      [first, second].map(({ name, fromMs, toMs }) => ({
        ...{ partition: name, from_at: new Date(fromMs), to_at: new Date(toMs) },
      })),
    )
    await test.db.raw(`alter table readings detach partition ${first.name}`)
    const { dropped } = await drop()
    expect(dropped.slice(0, 2)).toEqual([first.name, second.name])
    expect(await test.db.schema.hasTable(first.name)).toBe(false)
    expect(await test.db.schema.hasTable(second.name)).toBe(false)
  })

  it('holds up nobody, and comes back when somebody reads the whole table', async () => {
    const old = kept - 2 * weekMs
    await store(old)
    await rollUp()
    const reader = await test.db.transaction()
    await reader('readings').count()
    const dropping = drop()
    await expect.poll(isDetaching).toBe(true)
    // Meanwhile readings are stored, late ones too, and charts drawn.
    await store(now)
    await store(kept + dayMs)
    expect(await chart(now - minuteMs, now + minuteMs)).toMatchObject({ c: [100] })
    const first = await dropping
    expect(first.dropped).toEqual([])
    expect(first.left.length).toBeGreaterThan(0)
    // PostgreSQL's own first step is done, the second is not.
    expect((await listPartitions(test.db)).filter(({ detaching }) => detaching)).toHaveLength(1)
    await reader.rollback()
    expect((await drop()).dropped).toEqual(first.left)
    expect(await listPartitions(test.db)).not.toContainEqual(expect.objectContaining({ detaching: true }))
  }, 60_000)
})

async function isDetaching(): Promise<boolean> {
  return (await listPartitions(test.db)).some(({ detaching }) => detaching)
}
