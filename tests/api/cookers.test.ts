import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { Cooker } from '#shared/contract/cooker.ts'
import { Problem } from '#shared/contract/common.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { makePiece } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const clock = settableClock(Date.UTC(2026, 11, 1, 4, 35))
let test: TestServer
let told: { site: string; changes: LiveChanges }[]
let offset: number
let cabinet: number
let channels: number[]

beforeAll(async () => {
  test = await startTestServer({ clock })
  test.server.services.bus.subscribe((site, changes) => {
    if (changes.cookers) told.push({ site, changes })
  })
  const { own } = test.house
  ;[offset = 0, cabinet = 0] = own.cookers.map(({ id }) => id)
  channels = own.device.channelIds
})
afterAll(() => test.stop())
beforeEach(async () => {
  told = []
  clock.advance(60_000)
  await test.db('probe_placements').delete()
})

const List = z.object({ items: z.array(Cooker) })
const list = async () =>
  List.parse((await test.as('crew').get('/api/sites/quarry-road/cookers').expect(200)).body).items
const cooker = async (id: number) => (await list()).find((one) => one.id === id)
const usual = {
  name: 'South Offset',
  kind: 'offset',
  capacity: 6,
  pitSetC: 121,
  bandLowC: 113,
  bandHighC: 129,
}

describe('the cookers of a site', () => {
  it('come in the wall’s order, with set and band', async () => {
    const cookers = await list()
    expect(cookers.map(({ name }) => name)).toEqual(['North Offset', 'Cabinet One', 'Holding Cabinet'])
    expect(cookers[0]).toEqual({
      id: offset,
      version: 1,
      site: 'quarry-road',
      name: 'North Offset',
      kind: 'offset',
      capacity: 4,
      position: 1,
      pitSetC: 121,
      bandLowC: 113,
      bandHighC: 129,
      pitChannelId: null,
    })
  })

  it('leave out those that were retired', async () => {
    const [row] = z.array(z.object({ id: z.int() })).parse(
      await test
        .db('cookers')
        .insert({ ...rowOf('Old Barrel', test.house.own.id), retired_at: new Date(clock.now()) })
        .returning('id'),
    )
    expect(await cooker(row?.id ?? 0)).toBeUndefined()
    await test
      .as('lead')
      .put(`/api/cookers/${row?.id ?? 0}/probe`)
      .send({ channelId: null })
      .expect(404)
  })
})

describe('adding a cooker', () => {
  it('puts it at the end, tells the watchers and writes down who did it', async () => {
    const response = await test.as('lead').post('/api/sites/quarry-road/cookers').send(usual).expect(201)
    const added = Cooker.parse(response.body)
    expect(added).toMatchObject({ ...usual, version: 1, pitChannelId: null })
    expect(response.get('ETag')).toBe('"1"')
    expect((await list()).at(-1)).toEqual(added)
    expect(told).toEqual([{ site: 'quarry-road', changes: { cookers: [added] } }])
    const entries = await test.db('audit_entries').where({ subject: `cooker ${added.id}` })
    expect(entries).toMatchObject([
      { action: 'cooker.add', user_id: test.house.people.lead.id, site_id: test.house.own.id, data: usual },
    ])
  })

  it('refuses a name that another one has, at this site only', async () => {
    const twice = { ...usual, name: 'Cabinet One' }
    const response = await test.as('lead').post('/api/sites/quarry-road/cookers').send(twice).expect(409)
    expect(Problem.parse(response.body).errors).toEqual([
      { at: 'name', message: 'There is a cooker called Cabinet One already.' },
    ])
    expect(told).toEqual([])
    await test
      .as('stranger')
      .post('/api/sites/mill-yard/cookers')
      .send({ ...usual, name: 'Old Rotisserie' })
      .expect(201)
  })

  it('refuses a band upside down', async () => {
    const response = await test
      .as('lead')
      .post('/api/sites/quarry-road/cookers')
      .send({ ...usual, name: 'Kettle', bandLowC: 130 })
      .expect(400)
    expect(Problem.parse(response.body).errors).toEqual([
      { at: 'bandLowC', message: 'The low end of the band must lie below the high end.' },
    ])
  })
})

describe('changing a cooker', () => {
  const change = (id: number, version: number, body: object) =>
    test.as('engineer').patch(`/api/cookers/${id}`).set('If-Match', `"${version}"`).send(body)

  it('changes what is named and counts the version up', async () => {
    const before = await cooker(cabinet)
    const response = await change(cabinet, before?.version ?? 0, { capacity: 9 }).expect(200)
    const after = Cooker.parse(response.body)
    expect(after).toEqual({ ...before, capacity: 9, version: (before?.version ?? 0) + 1 })
    expect(response.get('ETag')).toBe(`"${after.version}"`)
    expect(told).toEqual([{ site: 'quarry-road', changes: { cookers: [after] } }])
  })

  it('is refused to whoever saw an older version', async () => {
    const version = (await cooker(cabinet))?.version ?? 0
    await change(cabinet, version, { name: 'Cabinet 1' }).expect(200)
    const response = await change(cabinet, version, { name: 'Cabinet One' }).expect(412)
    expect(Problem.parse(response.body).detail).toBe(
      'Somebody changed Cabinet 1 since you opened it. Look again, then change it.',
    )
    await change(cabinet, version + 1, { name: 'Cabinet One' }).expect(200)
  })

  it('lets one of two at the same moment win', async () => {
    const version = (await cooker(cabinet))?.version ?? 0
    const answers = await Promise.all([1, 2, 3].map((capacity) => change(cabinet, version, { capacity })))
    expect(answers.map(({ status }) => status).sort()).toEqual([200, 412, 412])
  })

  it('checks one end of the band against the other as it is', async () => {
    const version = (await cooker(offset))?.version ?? 0
    const response = await change(offset, version, { bandHighC: 112 }).expect(400)
    expect(Problem.parse(response.body).errors).toMatchObject([{ at: 'bandHighC' }])
    expect((await cooker(offset))?.version).toBe(version)
  })

  it('changes nothing when nothing is named', async () => {
    const before = await cooker(offset)
    await change(offset, before?.version ?? 0, {}).expect(200)
    expect(await cooker(offset)).toEqual(before)
  })
})

describe('the probe of a pit', () => {
  const place = (id: number, channelId: number | null) =>
    test.as('engineer').put(`/api/cookers/${id}/probe`).send({ channelId })
  const placements = () =>
    test.db('probe_placements').orderBy('id').select('channel_id', 'cooker_id', test.db.raw('during::text'))

  it('is placed and taken away, and where it was stays known', async () => {
    const from = clock.now()
    const response = await place(offset, channels[0] ?? 0).expect(200)
    expect(Cooker.parse(response.body).pitChannelId).toBe(channels[0])
    clock.advance(3_600_000)
    await place(offset, null).expect(200)
    expect((await cooker(offset))?.pitChannelId).toBeNull()
    const spans: unknown = await test
      .db('probe_placements')
      .select({ from: test.db.raw('lower(during)'), to: test.db.raw('upper(during)') })
    expect(spans).toEqual([{ from: new Date(from), to: new Date(clock.now()) }])
    expect(told.map(({ changes }) => changes.cookers?.[0]?.pitChannelId)).toEqual([channels[0], null])
  })

  it('is replaced by another', async () => {
    await place(offset, channels[0] ?? 0).expect(200)
    clock.advance(1000)
    await place(offset, channels[1] ?? 0).expect(200)
    expect((await cooker(offset))?.pitChannelId).toBe(channels[1])
    expect(await placements()).toHaveLength(2)
  })

  it('moves from one pit to another, and both are told', async () => {
    await place(offset, channels[0] ?? 0).expect(200)
    clock.advance(1000)
    told = []
    await place(cabinet, channels[0] ?? 0).expect(200)
    expect((await cooker(offset))?.pitChannelId).toBeNull()
    expect((await cooker(cabinet))?.pitChannelId).toBe(channels[0])
    expect(told[0]?.changes.cookers?.map(({ id, pitChannelId }) => [id, pitChannelId])).toEqual([
      [cabinet, channels[0]],
      [offset, null],
    ])
  })

  it('may change its mind within one millisecond', async () => {
    await place(offset, channels[0] ?? 0).expect(200)
    await place(offset, channels[1] ?? 0).expect(200)
    await place(offset, channels[0] ?? 0).expect(200)
    expect(await placements()).toMatchObject([{ channel_id: channels[0] }])
  })

  it('is not taken out of a piece', async () => {
    const pieceId = await makePiece(test.db, test.house, test.house.own, 'N1')
    await test.db('probe_placements').insert({
      channel_id: channels[2],
      role: 'meat',
      piece_id: pieceId,
      during: `[${new Date(clock.now()).toISOString()},)`,
    })
    const response = await place(offset, channels[2] ?? 0).expect(409)
    expect(Problem.parse(response.body).detail).toBe(
      'The probe on channel 3 of North box is in N1 now. Take it out of the piece first.',
    )
    expect((await cooker(offset))?.pitChannelId).toBeNull()
  })

  it('must belong to the site', async () => {
    await place(offset, test.house.foreign.device.channelIds[0] ?? 0).expect(422)
    await place(offset, 2_000_000_000).expect(422)
  })

  it('ends with one open placement when two people place it at the same moment', async () => {
    const answers = await Promise.all([place(offset, channels[0] ?? 0), place(cabinet, channels[0] ?? 0)])
    expect(answers.map(({ status }) => status)).toEqual([200, 200])
    const open = await test.db('probe_placements').whereRaw('upper_inf(during)')
    expect(open).toHaveLength(1)
  })
})

function rowOf(name: string, siteId: number) {
  return {
    site_id: siteId,
    name,
    kind: 'kettle',
    capacity: 1,
    position: 9,
    pit_set_c: 121,
    band_low_c: 113,
    band_high_c: 129,
  }
}
