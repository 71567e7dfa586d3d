import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { readingEndpoints, Trace } from '#shared/contract/reading.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { makePiece } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const now = Date.UTC(2026, 11, 1, 4, 0)
const clock = settableClock(now)
const minuteMs = 60_000
let test: TestServer
let channels: number[]
beforeAll(async () => {
  test = await startTestServer({ clock })
  channels = test.house.own.device.channelIds
})
afterAll(() => test.stop())

const send = (pack: unknown[], { username, secret } = test.house.own.device) =>
  test.api.post('/api/readings').auth(username, secret).send(pack)
const record = (channel: number, v: number, atMs: number, u = 'Cel') => ({
  n: String(channel),
  u,
  v,
  t: atMs / 1000,
})
const get = async (path: string, query: Record<string, string | number> = {}) =>
  (await test.as('manager').get(path).query(query).expect(200)).body as unknown

describe('sending over HTTP', () => {
  it('answers with what became of each record', async () => {
    const pack = [record(1, 60, now), record(1, 61, now + 1000), record(1, 9999, now), record(9, 1, now)]
    expect((await send(pack).expect(200)).body).toEqual({
      stored: 2,
      duplicates: 0,
      rejected: [
        { reason: 'value-out-of-range', detail: '9999 Cel is not between -50 and 600 °C' },
        { reason: 'unknown-channel', detail: 'this device has no channel “9”' },
      ],
    })
    const again = [record(1, 60, now), record(1, 61.5, now + 1000), record(1, 62, now + 2000)]
    expect((await send(again).expect(200)).body).toEqual({
      stored: 1,
      duplicates: 1,
      rejected: [
        { reason: 'conflict', detail: 'the reading of 2026-12-01T04:00:01.000Z is 61 already, not 61.5' },
      ],
    })
  })

  it('asks for the device’s secret', async () => {
    await send([record(1, 60, now)], { ...test.house.own.device, secret: 'wrong' }).expect(401)
    await test.api.post('/api/readings').send([]).expect(401)
  })

  it('refuses what is no pack', async () => {
    await send([]).expect(400)
    expect((await send([{ n: '1', v: 'hot' }]).expect(400)).body).toMatchObject({ errors: [{ at: '0.v' }] })
  })
})

describe('readings of a channel', () => {
  it('come in pages from the newest back, within a span', async () => {
    const at = (index: number) => now - 3_600_000 + index * 1000
    await send(Array.from({ length: 25 }, (_, index) => record(2, index, at(index)))).expect(200)
    const path = `/api/channels/${channels[1] ?? 0}/readings`
    const page = async (query: Record<string, string | number>) =>
      readingEndpoints.ofChannel.response.parse(await get(path, query))
    const seen: number[] = []
    let cursor: string | null = ''
    while (cursor !== null) {
      const { items, nextCursor } = await page({ limit: 10, ...(cursor !== '' && { cursor }) })
      seen.push(...items.map(({ value }) => value))
      cursor = nextCursor
    }
    expect(seen).toEqual(Array.from({ length: 25 }, (_, index) => 24 - index))
    const span = { from: new Date(at(5)).toISOString(), to: new Date(at(8)).toISOString() }
    expect((await page(span)).items.map(({ value }) => value)).toEqual([7, 6, 5])
    await test.as('manager').get(path).query({ cursor: 'yesterday' }).expect(400)
  })

  it('are corrected by the sensor of their time', async () => {
    const channelId = channels[2] ?? 0
    const change = new Date(now - 30 * minuteMs)
    await test
      .db('sensors')
      .where({ channel_id: channelId })
      .update({ during: test.db.raw('tstzrange(lower(during), ?)', [change]) })
    await test.db('sensors').insert({
      channel_id: channelId,
      kind: 'thermistor',
      offset_c: 0.5,
      coefficient_a: 1.10415912e-3,
      coefficient_b: 2.38917947e-4,
      coefficient_c: 6.93162653e-8,
      during: test.db.raw('tstzrange(?, null)', [change]),
    })
    // Another process changed the sensors: within a minute the server asks anew, here it is told to.
    test.server.services.deviceBook.invalidate()
    const before = now - 40 * minuteMs
    const after = now - 20 * minuteMs
    expect(
      (
        await send([
          record(3, 24, before),
          record(3, 9814, after, 'Ohm'),
          record(3, 24, after + 1000),
          record(3, 3542, after + 2000, 'Ohm'),
        ]).expect(200)
      ).body,
    ).toMatchObject({ stored: 3, rejected: [{ reason: 'wrong-unit' }] })
    const { items, unit } = readingEndpoints.ofChannel.response.parse(
      await get(`/api/channels/${channelId}/readings`),
    )
    expect(unit).toBe('Ohm')
    expect(items.map(({ value, celsius }) => [value, Number(celsius?.toFixed(3))])).toEqual([
      [3542, 50.5],
      [9814, 25.5],
      [24, 24],
    ])
    // The hotter, the fewer ohms: the extremes change places.
    const query = {
      from: new Date(now - 5 * 3_600_000).toISOString(),
      to: new Date(now).toISOString(),
      channels: channelId,
      points: 720,
    }
    const [trace] = readingEndpoints.traces.response.parse(
      await get('/api/sites/quarry-road/traces', query),
    ).traces
    expect(trace?.low.at(-1)).toBeCloseTo(25.5, 1)
    expect(trace?.high.at(-1)).toBeCloseTo(50.5, 1)
    expect(trace?.c[0]).toBe(24)
  })
})

describe('lines for charts', () => {
  const from = now - 10 * 3_600_000
  it('keep the extremes at no more points than asked, and show gaps', async () => {
    // Ten hours at four a minute, a door opened for one reading, an hour of silence.
    const readings = Array.from({ length: 10 * 240 }, (_, index) => ({ index, atMs: from + index * 15_000 }))
      .filter(({ atMs }) => atMs < from + 4 * 3_600_000 || atMs >= from + 5 * 3_600_000)
      .map(({ index, atMs }) => record(4, index === 700 ? 80 : 121 + (index % 4) / 10, atMs))
    for (let at = 0; at < readings.length; at += 400) await send(readings.slice(at, at + 400)).expect(200)
    const query = {
      from: new Date(from).toISOString(),
      to: new Date(now).toISOString(),
      channels: channels[3] ?? 0,
    }
    for (const points of [1500, 720, 60, 10]) {
      const answer = readingEndpoints.traces.response.parse(
        await get('/api/sites/quarry-road/traces', { ...query, points }),
      )
      const [trace] = answer.traces
      expect(trace?.at.length).toBeLessThanOrEqual(points)
      expect(Math.min(...(trace?.low ?? []).filter((low) => low !== null))).toBe(80)
      expect(trace?.at).toEqual([...(trace?.at ?? [])].sort((a, b) => a - b))
      if (points >= 60) {
        const gap = trace?.c.indexOf(null) ?? -1
        expect(trace?.c.filter((c) => c === null)).toHaveLength(1)
        expect(Math.abs((trace?.at[gap] ?? 0) - (from + 4.5 * 3_600_000))).toBeLessThan(10 * minuteMs)
      }
    }
  })

  it('below an hour are the readings themselves', async () => {
    const query = { from: new Date(from).toISOString(), to: new Date(from + 10 * minuteMs).toISOString() }
    const answer = readingEndpoints.traces.response.parse(
      await get('/api/sites/quarry-road/traces', { ...query, channels: channels[3] ?? 0 }),
    )
    expect(answer.traces[0]?.at).toEqual(Array.from({ length: 40 }, (_, index) => from + index * 15_000))
    expect(answer.traces[0]?.c.slice(0, 4)).toEqual([121, 121.1, 121.2, 121.3])
  })

  it('are of this site’s channels only, and of those placed in the span when none is named', async () => {
    const query = { from: new Date(from).toISOString(), to: new Date(now).toISOString() }
    const foreign = test.house.foreign.device.channelIds[0] ?? 0
    expect(await get('/api/sites/quarry-road/traces', { ...query, channels: foreign })).toMatchObject({
      traces: [],
    })
    const [, , , , fifth = 0, sixth = 0] = channels
    const cookerId = test.house.own.cookers[0]?.id
    await test.db('probe_placements').insert([
      { channel_id: sixth, role: 'pit', cooker_id: cookerId, during: `[${query.from},)` },
      { channel_id: fifth, role: 'pit', cooker_id: cookerId, during: '[2026-01-01,2026-01-02)' },
    ])
    const answer = readingEndpoints.traces.response.parse(await get('/api/sites/quarry-road/traces', query))
    expect(answer.traces.map(({ channelId }) => channelId)).toEqual([sixth])
    await test
      .as('crew')
      .get('/api/sites/quarry-road/traces')
      .query({ from: query.to, to: query.from })
      .expect(400)
  })
})

describe('the line of a piece', () => {
  it('goes from probe to probe and from pit to pit', async () => {
    await test.db('probe_placements').delete()
    const { own } = test.house
    const [north, cabinet] = own.cookers
    const pieceId = await makePiece(test.db, test.house, own)
    const on = now - 6 * 3_600_000
    const moved = now - 3 * 3_600_000
    const span = (fromMs: number, toMs?: number) =>
      `[${new Date(fromMs).toISOString()},${toMs === undefined ? '' : new Date(toMs).toISOString()})`
    await test
      .db('pieces')
      .where({ id: pieceId })
      .update({ on_at: new Date(on), stage: 'cooking' })
    await test.db('placements').where({ piece_id: pieceId }).delete()
    await test.db('placements').insert([
      { piece_id: pieceId, cooker_id: north?.id, during: span(on, moved) },
      { piece_id: pieceId, cooker_id: cabinet?.id, during: span(moved) },
    ])
    const device = test.house.own.device
    const extra = await test
      .as('engineer')
      .post('/api/sites/quarry-road/devices')
      .send({ name: 'Pits', channels: 4 })
    const box = z
      .object({ username: z.string(), secret: z.string(), channels: z.array(z.object({ id: z.number() })) })
      .parse(extra.body)
    const [one = 0, two = 0, three = 0, four = 0] = box.channels.map(({ id }) => id)
    await test.db('probe_placements').insert([
      { channel_id: one, role: 'meat', piece_id: pieceId, during: span(on, on + 3_600_000) },
      { channel_id: two, role: 'meat', piece_id: pieceId, during: span(on + 3_600_000) },
      { channel_id: three, role: 'pit', cooker_id: north?.id, during: '[2026-01-01,)' },
      { channel_id: four, role: 'pit', cooker_id: cabinet?.id, during: '[2026-01-01,)' },
    ])
    // Every probe tells its own number of tens all the time, so that the line shows where it came from.
    const readings = Array.from({ length: 6 * 60 }, (_, minute) => on + minute * minuteMs).flatMap((atMs) =>
      [1, 2, 3, 4].map((number) => record(number, number * 10, atMs)),
    )
    for (let at = 0; at < readings.length; at += 720)
      await send(readings.slice(at, at + 720), { ...device, ...box }).expect(200)
    const answer = z
      .object({ core: Trace, pit: Trace })
      .parse(await get(`/api/pieces/${pieceId}/trace`, { points: 1000 }))
    const at = (trace: Trace, ms: number) => trace.c[trace.at.findIndex((each) => each >= ms)]
    expect(answer.core.channelId).toBe(two)
    expect([at(answer.core, on), at(answer.core, on + 2 * 3_600_000)]).toEqual([10, 20])
    expect([at(answer.pit, on), at(answer.pit, moved + minuteMs)]).toEqual([30, 40])
    expect(answer.core.at.length).toBeGreaterThan(300)
    // However many probes it had: a step in which one took over from another is one point.
    const short = z
      .object({ core: Trace, pit: Trace })
      .parse(await get(`/api/pieces/${pieceId}/trace`, { points: 10 }))
    for (const { at: times, low, high } of [short.core, short.pit]) {
      expect(times.length).toBeLessThanOrEqual(10)
      expect(times).toEqual([...new Set(times)].sort((a, b) => a - b))
      expect(Math.min(...low.map(Number))).toBe(times === short.core.at ? 10 : 30)
      expect(Math.max(...high.map(Number))).toBe(times === short.core.at ? 20 : 40)
    }
  })

  it('is nothing before the piece is on', async () => {
    const pieceId = await makePiece(test.db, test.house, test.house.own)
    await test.db('pieces').where({ id: pieceId }).update({ on_at: null })
    expect(await get(`/api/pieces/${pieceId}/trace`)).toEqual({ core: null, pit: null })
  })
})

describe('for other parts of the server', () => {
  it('a series is a minute’s mean each', async () => {
    const { readings } = test.server.services
    const from = now - 10 * 3_600_000
    const { at, c } = await readings.seriesOf(channels[3] ?? 0, from, from + 3 * minuteMs)
    expect([...c].map((celsius) => Number(celsius.toFixed(6)))).toEqual([121.15, 121.15, 121.15])
    expect([...at]).toEqual([0, 1, 2].map((minute) => from + minute * minuteMs + 22_500))
  })

  it('latest is the newest of each channel, whatever came last', async () => {
    const { readings } = test.server.services
    await send([record(5, 70, now - 1000), record(5, 60, now - 9000)]).expect(200)
    await send([record(5, 50, now - 20_000)]).expect(200)
    expect(await readings.latestOf([channels[4] ?? 0, channels[5] ?? 0, 999_999])).toEqual([
      { channelId: channels[4], at: new Date(now - 1000).toISOString(), c: 70 },
    ])
  })
})
