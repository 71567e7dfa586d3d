import { randomUUID } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { Piece, PieceDetail, Recipe } from '#shared/contract/piece.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer()
})
afterAll(() => server.stop())

const ago = (minutes: number) => new Date(systemClock.now() - minutes * 60_000).toISOString()
const cooker = (index: number) => server.house.own.cookers[index]?.id ?? 0
const channel = (index: number) => server.house.own.device.channelIds[index] ?? 0
const recipe = (index = 0) => server.house.recipes[index]?.id ?? 0

function newPiece(change: Record<string, unknown> = {}) {
  return {
    eventId: randomUUID(),
    label: 'N1',
    recipeId: recipe(),
    cookerId: cooker(0),
    rawKg: 6.2,
    onAt: ago(10),
    ...change,
  }
}
const send = (body: object) => server.as('crew').post('/api/sites/quarry-road/pieces').send(body)
const start = async (change: Record<string, unknown> = {}) => {
  const answer = await send(newPiece(change))
  expect(answer.status, answer.text).toBe(201)
  return Piece.parse(answer.body)
}
const log = async (pieceId: number, fact: object, happenedAt = ago(1)) => {
  const answer = await server
    .as('crew')
    .post(`/api/pieces/${pieceId}/events`)
    .send({ id: randomUUID(), happenedAt, fact })
  expect(answer.status, answer.text).toBe(201)
}
const finish = (pieceId: number) => log(pieceId, { kind: 'sliced' })
const Refusal = z.object({ detail: z.string() })

describe('recipes', () => {
  it('are the house’s', async () => {
    const answer = await server.as('display').get('/api/sites/quarry-road/recipes').expect(200)
    const { items } = z.object({ items: z.array(Recipe) }).parse(answer.body)
    expect(items.map((item) => item.slug)).toEqual(['house-brisket', 'peppered-pastrami'])
  })
})

describe('starting a piece', () => {
  it('takes what the recipe says, unless said otherwise', async () => {
    const plain = await start({ recipeId: recipe(1), onAt: ago(10), position: 'top left' })
    expect(plain).toMatchObject({
      version: 2,
      site: 'quarry-road',
      stage: 'cooking',
      cured: true,
      pullAtC: 92,
      wrapMethod: 'paper',
      cookerId: cooker(0),
      position: 'top left',
      channelId: null,
    })
    const own = await start({ recipeId: recipe(1), cured: false, pullAtC: 95, wrapMethod: 'none' })
    expect(own).toMatchObject({ cured: false, pullAtC: 95, wrapMethod: 'none' })
    await finish(plain.id)
    await finish(own.id)
  })

  it('starts one piece when it is sent twice', async () => {
    const body = newPiece({ label: 'twice' })
    const [first, second] = await Promise.all([send(body), send(body)])
    expect([first.status, second.status]).toEqual([201, 201])
    expect(Piece.parse(second.body).id).toBe(Piece.parse(first.body).id)
    const other = await send({ ...body, cookerId: cooker(1) })
    expect(other.status).toBe(409)
    await finish(Piece.parse(first.body).id)
  })

  it('says how many stand there when the cooker is full', async () => {
    const pieces = []
    for (const label of ['A', 'B', 'C', 'D']) pieces.push(await start({ label, cookerId: cooker(1) }))
    const full = await send(newPiece({ label: 'E', cookerId: cooker(1) }))
    expect(full.status).toBe(409)
    expect(Refusal.parse(full.body).detail).toBe('4 pieces stand on Cabinet One; it takes 4.')
    const [first] = pieces
    await log(first?.id ?? 0, { kind: 'pull', by: 'feel' })
    pieces.push(await start({ label: 'E', cookerId: cooker(1) }))
    for (const piece of pieces) await finish(piece.id)
  })

  it('lets two people race for the last place, and gives it to one', async () => {
    const pieces = []
    for (const label of ['A', 'B', 'C']) pieces.push(await start({ label, cookerId: cooker(1) }))
    const both = await Promise.all(['D', 'E'].map((label) => send(newPiece({ label, cookerId: cooker(1) }))))
    expect(both.map((answer) => answer.status).sort()).toEqual([201, 409])
    for (const answer of both) if (answer.status === 201) pieces.push(Piece.parse(answer.body))
    for (const piece of pieces) await finish(piece.id)
  })

  it.each([
    ['a time to come', () => ({ onAt: ago(-5) })],
    ['a cooker of another site', () => ({ cookerId: server.house.foreign.cookers[0]?.id })],
    ['a probe of another site', () => ({ channelId: server.house.foreign.device.channelIds[0] })],
    ['a recipe that is not there', () => ({ recipeId: 9999 })],
    ['a service that is not there', () => ({ serviceId: 9999 })],
  ])('refuses %s, and starts nothing', async (_, change) => {
    const before = await server.db('pieces').count({ count: '*' })
    const answer = await send(newPiece(change()))
    expect(answer.status, answer.text).toBe(422)
    expect(await server.db('pieces').count({ count: '*' })).toEqual(before)
  })
})

describe('probes', () => {
  it('go in with the start, and out with the slicing', async () => {
    const piece = await start({ channelId: channel(1) })
    expect(piece.channelId).toBe(channel(1))
    await finish(piece.id)
    const detail = PieceDetail.parse((await server.as('crew').get(`/api/pieces/${piece.id}`)).body)
    expect(detail.piece.channelId).toBeNull()
    expect(await placesOf(piece.id)).toEqual([
      { channel: channel(1), from: piece.onAt, to: detail.piece.doneAt },
    ])
  })

  it('are taken over from a piece that was pulled, but not from one that cooks', async () => {
    const first = await start({ label: 'first', channelId: channel(5), onAt: ago(60) })
    const refused = await send(newPiece({ label: 'next', channelId: channel(5) }))
    expect(refused.status).toBe(409)
    expect(Refusal.parse(refused.body).detail).toBe(
      'That probe is in first, which still cooks. Take another, or take it out there first.',
    )
    await log(first.id, { kind: 'pull', by: 'temperature' }, ago(5))
    const next = await start({ label: 'next', channelId: channel(5), onAt: ago(20) })
    const pulled = PieceDetail.parse((await server.as('crew').get(`/api/pieces/${first.id}`)).body).piece
    expect(pulled.channelId).toBeNull()
    // It was in the first piece until its pull, whatever the start says.
    expect(await placesOf(next.id)).toEqual([{ channel: channel(5), from: pulled.pulledAt, to: null }])
    await finish(first.id)
    await finish(next.id)
  })

  it('of a pit stay where they are', async () => {
    await server
      .as('engineer')
      .put(`/api/cookers/${cooker(0)}/probe`)
      .send({ channelId: channel(0) })
      .expect(200)
    const answer = await send(newPiece({ channelId: channel(0) }))
    expect(answer.status).toBe(409)
    expect(Refusal.parse(answer.body).detail).toContain('reads the pit of North Offset')
  })

  it('can be changed and taken out during the cook', async () => {
    const piece = await start({ label: 'swap', onAt: ago(30) })
    const put = (body: object) => server.as('crew').put(`/api/pieces/${piece.id}/probe`).send(body)
    await put({ channelId: channel(2), at: ago(20) }).expect(200)
    const changed = Piece.parse((await put({ channelId: channel(3), at: ago(10) }).expect(200)).body)
    expect(changed.channelId).toBe(channel(3))
    expect(changed.version).toBeGreaterThan(piece.version)
    const out = Piece.parse((await put({ channelId: null, at: ago(5) }).expect(200)).body)
    expect(out.channelId).toBeNull()
    expect((await placesOf(piece.id)).map((place) => place.channel)).toEqual([channel(2), channel(3)])
    await put({ channelId: channel(2), at: ago(40) }).expect(422)
    await put({ channelId: channel(2), at: ago(-5) }).expect(422)
    await finish(piece.id)
    await put({ channelId: channel(2), at: ago(1) }).expect(422)
  })

  it('are in no two pieces at once, however late somebody logs', async () => {
    const first = await start({ label: 'first', channelId: channel(2), onAt: ago(60) })
    await finish(first.id)
    const second = await start({ label: 'second', channelId: channel(2), onAt: ago(30) })
    await log(second.id, { kind: 'pull', by: 'feel' }, ago(15))
    const third = await start({ label: 'third', channelId: channel(2), onAt: ago(10) })
    const [place] = await placesOf(third.id)
    expect(place?.from).toBe((await placesOf(first.id))[0]?.to)
    expect(await placesOf(second.id)).toEqual([])
    await finish(second.id)
    await finish(third.id)
  })
})

describe('changing a piece', () => {
  it('names the version it saw', async () => {
    const piece = await start({ label: 'old name' })
    const patch = (version: number, body: object) =>
      server.as('lead').patch(`/api/pieces/${piece.id}`).set('If-Match', `"${version}"`).send(body)
    const changed = await patch(piece.version, { label: 'new name', pullAtC: 93 }).expect(200)
    expect(Piece.parse(changed.body)).toMatchObject({ label: 'new name', pullAtC: 93, rawKg: 6.2 })
    expect(changed.headers).toMatchObject({ etag: `"${piece.version + 1}"` })
    await patch(piece.version, { label: 'too late' }).expect(412)
    await patch(piece.version + 1, { followsId: piece.id }).expect(422)
    await patch(piece.version + 1, { serviceId: 9999 }).expect(422)
    await finish(piece.id)
  })

  it('follows a sibling that has a probe', async () => {
    const sibling = await start({ label: 'probed', channelId: channel(4) })
    const piece = await start({ label: 'bare' })
    const patch = (of: Piece, body: object) =>
      server.as('lead').patch(`/api/pieces/${of.id}`).set('If-Match', `"${of.version}"`).send(body)
    const follows = Piece.parse((await patch(piece, { followsId: sibling.id }).expect(200)).body)
    expect(follows.followsId).toBe(sibling.id)
    await patch(sibling, { followsId: piece.id }).expect(422)
    await finish(sibling.id)
    await finish(piece.id)
  })
})

describe('the lists', () => {
  it('page through a site’s pieces, newest first', async () => {
    const open = await start({ label: 'open' })
    const List = z.object({ items: z.array(Piece), nextCursor: z.string().nullable() })
    const get = async (query: string) =>
      List.parse((await server.as('manager').get(`/api/sites/quarry-road/pieces?${query}`).expect(200)).body)
    expect((await get('which=open')).items.map((piece) => piece.id)).toEqual([open.id])
    const all = await get('which=all&limit=500')
    const seen: number[] = []
    let page = await get('which=all&limit=3')
    for (; page.nextCursor !== null; page = await get(`which=all&limit=3&cursor=${page.nextCursor}`)) {
      seen.push(...page.items.map((piece) => piece.id))
    }
    seen.push(...page.items.map((piece) => piece.id))
    expect(seen).toEqual(all.items.map((piece) => piece.id))
    expect(seen.length).toBeGreaterThan(6)
    expect(seen).toEqual([...seen].sort((a, b) => b - a))
    expect((await get('which=done&limit=500')).items).toHaveLength(seen.length - 1)
    await server.as('manager').get('/api/sites/quarry-road/pieces?cursor=nonsense').expect(400)
    await finish(open.id)
  })
})

async function placesOf(pieceId: number) {
  const answer: unknown = await server.db.raw(
    `select channel_id, lower(during) as since, upper(during) as until from probe_placements
     where piece_id = ? order by lower(during)`,
    [pieceId],
  )
  return z
    .object({
      rows: z.array(z.object({ channel_id: z.number(), since: z.date(), until: z.date().nullable() })),
    })
    .parse(answer)
    .rows.map((row) => ({
      channel: row.channel_id,
      from: row.since.toISOString(),
      to: row.until?.toISOString() ?? null,
    }))
}
