import { randomUUID } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { Piece } from '#shared/contract/piece.ts'
import { Service, Tonight } from '#shared/contract/site.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let server: TestServer
const heard: LiveChanges[] = []
beforeAll(async () => {
  server = await startTestServer()
  server.server.services.bus.subscribe((site, changes) => {
    if (site === 'quarry-road') heard.push(changes)
  })
})
afterAll(() => server.stop())

const hour = 3_600_000
const inHours = (hours: number) => new Date(systemClock.now() + hours * hour).toISOString()
const tonight = async (role: 'display' | 'crew' = 'display') =>
  Tonight.parse((await server.as(role).get('/api/sites/quarry-road/tonight').expect(200)).body)

async function addService(hours: number): Promise<Service> {
  const answer = await server
    .as('lead')
    .post('/api/sites/quarry-road/services')
    .send({ servesAt: inHours(hours), portions: 120, note: 'party of 20 at noon' })
    .expect(201)
  return Service.parse(answer.body)
}

describe('services', () => {
  it('belong to the business day of the site', async () => {
    const answer = await server
      .as('lead')
      .post('/api/sites/quarry-road/services')
      // Half past two at night in Chicago: still the day before.
      .send({ servesAt: '2026-12-05T08:30:00Z', portions: 40 })
      .expect(201)
    expect(Service.parse(answer.body)).toMatchObject({ date: '2026-12-04', portions: 40, note: null })
  })

  it('are added once an hour', async () => {
    const servesAt = '2026-12-06T17:00:00Z'
    const post = () =>
      server.as('lead').post('/api/sites/quarry-road/services').send({ servesAt, portions: 40 })
    await post().expect(201)
    const again = await post().expect(409)
    expect(z.object({ detail: z.string() }).parse(again.body).detail).toBe(
      'There is a service at that hour already.',
    )
  })
})

describe('tonight', () => {
  it('shows what stands, what is served soon and who reports', async () => {
    const soon = await addService(8)
    const past = await addService(-5)
    await addService(-7)
    await addService(40)
    const started = await server
      .as('crew')
      .post('/api/sites/quarry-road/pieces')
      .send({
        eventId: randomUUID(),
        label: 'N1',
        recipeId: server.house.recipes[0]?.id,
        cookerId: server.house.own.cookers[0]?.id,
        channelId: server.house.own.device.channelIds[1],
        serviceId: soon.id,
        rawKg: 6,
        onAt: inHours(-2),
      })
    expect(started.status, started.text).toBe(201)
    const piece = Piece.parse(started.body)
    const channel = String(2)
    await server.api
      .post('/api/readings')
      .auth(server.house.own.device.username, server.house.own.device.secret)
      .send([{ n: channel, u: 'Cel', v: 41.5, bt: systemClock.now() / 1000 - 60 }])
      .expect(200)

    const night = await tonight()
    expect(night.site).toMatchObject({ slug: 'quarry-road', timeZone: 'America/Chicago', elevationM: 210 })
    expect(night.services.map((service) => service.id)).toEqual([past.id, soon.id])
    expect(night.pieces).toEqual([piece])
    expect(night.cookers.map((cooker) => cooker.name)).toEqual([
      'North Offset',
      'Cabinet One',
      'Holding Cabinet',
    ])
    expect(night.devices[0]?.channels[1]?.placedIn).toEqual({ kind: 'piece', id: piece.id, name: 'N1' })
    expect(night.latest).toMatchObject([{ channelId: piece.channelId, c: 41.5 }])
    expect(night.forecasts).toEqual([])
  })

  it('lets go of a piece once it is sliced, and keeps one that is held', async () => {
    const [piece] = (await tonight()).pieces
    const log = (fact: object) =>
      server
        .as('crew')
        .post(`/api/pieces/${piece?.id ?? 0}/events`)
        .send({ id: randomUUID(), happenedAt: inHours(-0.5), fact })
        .expect(201)
    await log({ kind: 'pull', by: 'feel' })
    await log({ kind: 'hold', cookerId: server.house.own.cookers[2]?.id })
    expect((await tonight()).pieces.map(({ stage }) => stage)).toEqual(['holding'])
    await log({ kind: 'sliced' })
    expect((await tonight()).pieces).toEqual([])
  })

  it('knows nothing of another site', async () => {
    const answer = await server.as('stranger').get('/api/sites/mill-yard/tonight').expect(200)
    const night = Tonight.parse(answer.body)
    expect(night.pieces).toEqual([])
    expect(night.services).toEqual([])
    expect(night.devices.map((device) => device.site)).toEqual(['mill-yard'])
  })

  it('hears of every change: pieces, their events, services and cookers', async () => {
    heard.length = 0
    const [cooker] = server.house.own.cookers
    await server
      .as('crew')
      .post(`/api/cookers/${cooker?.id ?? 0}/events`)
      .send({ id: randomUUID(), happenedAt: inHours(0), fact: { kind: 'pit_set', pitSetC: 118 } })
      .expect(201)
    await addService(9)
    const started = await server
      .as('crew')
      .post('/api/sites/quarry-road/pieces')
      .send({
        eventId: randomUUID(),
        label: 'N2',
        recipeId: server.house.recipes[0]?.id,
        cookerId: cooker?.id,
        rawKg: 6,
        onAt: inHours(-1),
      })
      .expect(201)
    const piece = Piece.parse(started.body)
    expect(heard.flatMap((changes) => changes.cookers ?? [])).toMatchObject([
      { id: cooker?.id, pitSetC: 118 },
    ])
    expect(heard.flatMap((changes) => changes.services ?? [])).toHaveLength(1)
    expect(heard.flatMap((changes) => changes.pieces ?? [])).toEqual([piece])
    expect(heard.flatMap((changes) => changes.events ?? []).map((event) => event.fact.kind)).toEqual([
      'pit_set',
      'on',
    ])
  })
})
