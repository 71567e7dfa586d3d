import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { seededRandom } from '#shared/domain/random.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { connectDevice, publish, record, topicOf } from './devices.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
})
afterAll(() => server.stop())

const Rows = z.array(z.object({ at: z.date(), value: z.number() }))
async function rowsOf(channelId: number) {
  const rows: unknown = await server.db('readings').where({ channel_id: channelId }).orderBy('at')
  return Rows.parse(rows).map(({ at, value }) => [at.getTime(), value])
}

async function rejections() {
  const rows: unknown = await server.db('rejected_messages').orderBy('id').select('reason', 'detail')
  return z.array(z.object({ reason: z.string(), detail: z.string() })).parse(rows)
}

const base = Math.floor(systemClock.now() / 60_000) * 60_000 - 3_600_000

describe('a reading is its channel and its time', () => {
  test('sent again it is one row, in the same pack too', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    const pack = [record(1, 60, base), record(1, 61, base + 5000)]
    await publish(client, topicOf(device), pack)
    await publish(client, topicOf(device), pack)
    await publish(client, topicOf(device), [...pack, ...pack, record(1, 62, base + 10_000)])
    expect(await rowsOf(device.channelIds[0] ?? 0)).toEqual([
      [base, 60],
      [base + 5000, 61],
      [base + 10_000, 62],
    ])
    expect(await rejections()).toEqual([])
    await client.endAsync()
  })

  test('with another value it is a conflict: the first stays, the second is on record', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    await publish(client, topicOf(device), [record(2, 70, base), record(2, 70.5, base)])
    await publish(client, topicOf(device), [record(2, 71, base), record(2, 72, base + 1000)])
    expect(await rowsOf(device.channelIds[1] ?? 0)).toEqual([
      [base, 70],
      [base + 1000, 72],
    ])
    const found = await rejections()
    expect(found.map(({ reason }) => reason)).toEqual(['conflict', 'conflict'])
    expect(found.map(({ detail }) => detail)).toEqual([
      `the reading of ${new Date(base).toISOString()} is 70 already, not 70.5`,
      `the reading of ${new Date(base).toISOString()} is 70 already, not 71`,
    ])
    await client.endAsync()
  })

  test('times are told apart by the millisecond and no finer', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    await publish(client, topicOf(device), [
      record(3, 50, base),
      record(3, 50, base + 1),
      record(3, 50, base + 1.3),
    ])
    expect(await rowsOf(device.channelIds[2] ?? 0)).toEqual([
      [base, 50],
      [base + 1, 50],
    ])
    await client.endAsync()
  })
})

test('late, out of order, repeated: the roll-ups equal what the readings give', async () => {
  const { device } = server.house.own
  const random = seededRandom('roll-ups')
  const client = await connectDevice(server.mqttPort, device)
  const readings = Array.from({ length: 3000 }, (_, index) =>
    record(4 + (index % 3), Math.round(random.uniform() * 2000) / 10, base + Math.floor(index / 3) * 1700),
  )
  const shuffled = [...readings, ...readings.slice(0, 700)]
    .map((reading) => ({ reading, key: random.uniform() }))
    .sort((a, b) => a.key - b.key)
    .map(({ reading }) => reading)
  // Several packs on the way at once, of all sizes, so that batches are cut anywhere.
  const packs: unknown[][] = []
  for (let at = 0; at < shuffled.length;) {
    const size = 1 + Math.floor(random.uniform() * 60)
    packs.push(shuffled.slice(at, at + size))
    at += size
  }
  await Promise.all(packs.map((pack) => publish(client, topicOf(device), pack)))
  await client.endAsync()

  const wrong: unknown = await server.db.raw(`
    with should as (
      select channel_id, date_trunc('minute', at) as minute, min(value) as low, max(value) as high, count(*) as count,
        avg(value) as mean, (array_agg(value order by at desc))[1] as last, max(at) as last_at
      from readings group by 1, 2)
    select * from should s full join readings_1m m using (channel_id, minute)
    where m.low is distinct from s.low or m.high is distinct from s.high or m.count is distinct from s.count
      or m.last is distinct from s.last or m.last_at is distinct from s.last_at
      or abs(m.total / m.count - s.mean) > 1e-9 or m.total is null or s.mean is null`)
  expect(z.object({ rows: z.array(z.unknown()) }).parse(wrong).rows).toEqual([])
  const rows = await server.db('readings').whereIn('channel_id', device.channelIds.slice(3)).count()
  expect(rows).toMatchObject([{ count: 3000 }])
})
