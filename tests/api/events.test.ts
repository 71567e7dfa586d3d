import { randomUUID } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { Cooker } from '#shared/contract/cooker.ts'
import { CookEvent } from '#shared/contract/event.ts'
import { Piece, PieceDetail } from '#shared/contract/piece.ts'
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
const Refusal = z.object({ detail: z.string() })

async function startPiece(change: Record<string, unknown> = {}): Promise<Piece> {
  const answer = await server
    .as('crew')
    .post('/api/sites/quarry-road/pieces')
    .send({
      eventId: randomUUID(),
      label: 'N1',
      recipeId: server.house.recipes[0]?.id,
      cookerId: cooker(0),
      rawKg: 6.2,
      onAt: ago(600),
      ...change,
    })
  expect(answer.status, answer.text).toBe(201)
  return Piece.parse(answer.body)
}

interface Entry {
  id?: string
  happenedAt?: string
  fact: object
  note?: string
  correctsId?: string
}
const post = (path: string, entry: Entry) =>
  server
    .as('crew')
    .post(path)
    .send({ id: randomUUID(), happenedAt: ago(1), ...entry })
const onPiece = (piece: Piece, entry: Entry) => post(`/api/pieces/${piece.id}/events`, entry)
async function logged(sent: ReturnType<typeof post>): Promise<CookEvent> {
  const answer = await sent
  expect(answer.status, answer.text).toBe(201)
  return CookEvent.parse(answer.body)
}
async function detailOf(piece: Piece): Promise<PieceDetail> {
  return PieceDetail.parse((await server.as('crew').get(`/api/pieces/${piece.id}`).expect(200)).body)
}
async function finish(...pieces: Piece[]): Promise<void> {
  for (const piece of pieces) await logged(onPiece(piece, { fact: { kind: 'sliced' } }))
}

describe('logging on a piece', () => {
  it('moves the piece on, with who said so', async () => {
    const piece = await startPiece()
    const wrap = await logged(
      onPiece(piece, { happenedAt: ago(120), fact: { kind: 'wrap', method: 'paper' }, note: '  bark set ' }),
    )
    expect(wrap).toMatchObject({ note: 'bark set', by: { name: 'A crew' }, correctedById: null })
    const { piece: now, events, cooker: where } = await detailOf(piece)
    expect(now).toMatchObject({ stage: 'wrapped', wrappedAt: wrap.happenedAt, wrappedWith: 'paper' })
    expect(now.version).toBe(piece.version + 1)
    expect(events.map((event) => event.fact.kind)).toEqual(['on', 'wrap'])
    expect(where).toEqual({ id: cooker(0), name: 'North Offset' })
    await finish(piece)
  })

  it('keeps one of the same event sent twice, even at once', async () => {
    const piece = await startPiece()
    const entry = { id: randomUUID(), happenedAt: ago(5), fact: { kind: 'wrap', method: 'paper' } }
    const answers = await Promise.all([onPiece(piece, entry), onPiece(piece, entry), onPiece(piece, entry)])
    expect(answers.map((answer) => answer.status)).toEqual([201, 201, 201])
    expect(new Set(answers.map((answer) => answer.text)).size).toBe(1)
    expect((await detailOf(piece)).events).toHaveLength(2)
    await onPiece(piece, { ...entry, fact: { kind: 'wrap', method: 'foil' } }).expect(409)
    await onPiece(piece, { ...entry, note: 'another' }).expect(409)
    await finish(piece)
  })

  it('takes back a pull: the piece stands on its cooker again', async () => {
    const piece = await startPiece({ channelId: channel(1) })
    const pull = await logged(onPiece(piece, { happenedAt: ago(30), fact: { kind: 'pull', by: 'feel' } }))
    expect((await detailOf(piece)).piece.stage).toBe('pulled')
    await logged(onPiece(piece, { fact: { kind: 'withdrawn' }, correctsId: pull.id }))
    const { piece: undone, events } = await detailOf(piece)
    expect(undone).toMatchObject({ stage: 'cooking', pulledAt: null, channelId: channel(1) })
    expect(await standing(piece)).toEqual([{ cookerId: cooker(0), isOpen: true }])
    const taken = events.find((event) => event.id === pull.id)
    expect(taken?.correctedById).toBe(events.at(-1)?.id)
    await finish(piece)
  })

  it('takes back a slicing: the probe is in it again', async () => {
    const piece = await startPiece({ channelId: channel(2) })
    const sliced = await logged(onPiece(piece, { happenedAt: ago(3), fact: { kind: 'sliced' } }))
    expect((await detailOf(piece)).piece.channelId).toBeNull()
    await logged(onPiece(piece, { fact: { kind: 'withdrawn' }, correctsId: sliced.id }))
    expect((await detailOf(piece)).piece).toMatchObject({ stage: 'cooking', channelId: channel(2) })
    await finish(piece)
  })

  it('corrects an entry once, and the correction once', async () => {
    const piece = await startPiece()
    const first = await logged(
      onPiece(piece, { happenedAt: ago(100), fact: { kind: 'wrap', method: 'paper' } }),
    )
    const second = { happenedAt: ago(130), fact: { kind: 'wrap', method: 'foil' } }
    const corrected = await logged(onPiece(piece, { ...second, correctsId: first.id }))
    expect((await detailOf(piece)).piece).toMatchObject({
      wrappedAt: corrected.happenedAt,
      wrappedWith: 'foil',
    })
    const again = await onPiece(piece, { ...second, correctsId: first.id })
    expect(again.status).toBe(409)
    expect(Refusal.parse(again.body).detail).toContain('corrected that entry already')
    await logged(onPiece(piece, { ...second, happenedAt: ago(140), correctsId: corrected.id }))
    await onPiece(piece, { fact: { kind: 'spritz' }, correctsId: corrected.id }).expect(409)
    const { events } = await detailOf(piece)
    expect(events.filter((event) => event.correctedById === null)).toHaveLength(2)
    await finish(piece)
  })

  it('two people who correct the same entry at once: one is told', async () => {
    const piece = await startPiece()
    const wrap = await logged(
      onPiece(piece, { happenedAt: ago(50), fact: { kind: 'wrap', method: 'paper' } }),
    )
    const answers = await Promise.all(
      ['foil', 'boat'].map((method) =>
        onPiece(piece, { happenedAt: ago(50), fact: { kind: 'wrap', method }, correctsId: wrap.id }),
      ),
    )
    expect(answers.map((answer) => answer.status).sort()).toEqual([201, 409])
    await finish(piece)
  })

  it('refuses what contradicts the log, in words', async () => {
    const piece = await startPiece()
    const refused = async (entry: Entry) => {
      const answer = await onPiece(piece, entry)
      expect(answer.status, answer.text).toBe(422)
      return Refusal.parse(answer.body).detail
    }
    const wrap = { kind: 'wrap', method: 'paper' }
    expect(await refused({ happenedAt: ago(700), fact: wrap })).toContain('before the piece went on')
    expect(await refused({ happenedAt: ago(-3), fact: wrap })).toContain('still to come')
    await logged(
      onPiece(piece, { happenedAt: ago(-1), fact: { kind: 'note' }, note: 'a clock a little ahead' }),
    )
    const pull = await logged(onPiece(piece, { happenedAt: ago(60), fact: { kind: 'pull', by: 'feel' } }))
    expect(await refused({ happenedAt: ago(30), fact: wrap })).toContain('pulled before that')
    expect(await refused({ fact: { kind: 'pull', by: 'feel' } })).toContain('pulled already')
    expect(await refused({ fact: { kind: 'on', cookerId: cooker(1) } })).toContain('went on already')
    expect(await refused({ fact: { kind: 'fire_tended' } })).toContain('on a cooker')
    expect(await refused({ fact: { kind: 'withdrawn' } })).toContain('Name the entry')
    expect(await refused({ fact: { kind: 'withdrawn' }, correctsId: randomUUID() })).toContain(
      'not in this log',
    )
    expect(await refused({ fact: { kind: 'spritz' }, correctsId: pull.id })).toContain('same kind')
    expect(
      await refused({ fact: { kind: 'moved', toCookerId: server.house.foreign.cookers[0]?.id } }),
    ).toContain('no such cooker')
    const undo = await logged(onPiece(piece, { fact: { kind: 'withdrawn' }, correctsId: pull.id }))
    expect(await refused({ fact: { kind: 'withdrawn' }, correctsId: undo.id })).toContain('taken back')
    await logged(onPiece(piece, { happenedAt: ago(30), fact: wrap }))
    await finish(piece)
  })

  it('refuses a move onto a full cooker, and takes a late entry about one', async () => {
    const pieces: Piece[] = []
    for (const label of ['A', 'B', 'C', 'D']) pieces.push(await startPiece({ label, cookerId: cooker(1) }))
    const piece = await startPiece({ label: 'mover' })
    await onPiece(piece, { fact: { kind: 'moved', toCookerId: cooker(1) } }).expect(409)
    await logged(onPiece(piece, { happenedAt: ago(60), fact: { kind: 'moved', toCookerId: cooker(2) } }))
    await logged(onPiece(piece, { happenedAt: ago(90), fact: { kind: 'moved', toCookerId: cooker(1) } }))
    expect(await standing(piece)).toEqual([
      { cookerId: cooker(0), isOpen: false },
      { cookerId: cooker(1), isOpen: false },
      { cookerId: cooker(2), isOpen: true },
    ])
    await finish(piece, ...pieces)
  })

  it('holds on another cooker, and keeps the weights', async () => {
    const piece = await startPiece()
    expect(piece.cookedOnId).toBe(piece.cookerId)
    await logged(onPiece(piece, { happenedAt: ago(60), fact: { kind: 'pull', by: 'temperature' } }))
    await logged(onPiece(piece, { happenedAt: ago(55), fact: { kind: 'weighed', stage: 'cooked', kg: 3.3 } }))
    await logged(onPiece(piece, { happenedAt: ago(50), fact: { kind: 'rest' } }))
    await logged(onPiece(piece, { happenedAt: ago(10), fact: { kind: 'hold', cookerId: cooker(2) } }))
    expect((await detailOf(piece)).piece).toMatchObject({
      stage: 'holding',
      cookerId: cooker(2),
      cookedOnId: piece.cookedOnId,
      cookedKg: 3.3,
      trimmedKg: null,
    })
    await finish(piece)
    expect((await standing(piece)).every((place) => !place.isOpen)).toBe(true)
  })

  it('moves the start of the cook and its probe with a corrected going-on', async () => {
    const piece = await startPiece({ channelId: channel(3), onAt: ago(300) })
    const [on] = (await detailOf(piece)).events
    const earlier = ago(330)
    const fact = { kind: 'on', cookerId: cooker(0) }
    await logged(onPiece(piece, { happenedAt: earlier, fact, correctsId: on?.id ?? '' }))
    expect((await detailOf(piece)).piece.onAt).toBe(earlier)
    const place: unknown = await server
      .db('probe_placements')
      .where({ piece_id: piece.id })
      .first(server.db.raw('lower(during) as since'))
    expect(z.object({ since: z.date() }).parse(place).since.toISOString()).toBe(earlier)
    await finish(piece)
  })

  it('is never changed in the database', async () => {
    await expect(server.db('events').update({ note: 'otherwise' })).rejects.toThrow('append-only')
    await expect(server.db('events').delete()).rejects.toThrow('append-only')
  })
})

describe('logging on a cooker', () => {
  const onCooker = (entry: Entry) => post(`/api/cookers/${cooker(1)}/events`, entry)
  async function pit() {
    const answer = await server.as('crew').get('/api/sites/quarry-road/cookers').expect(200)
    const { items } = z.object({ items: z.array(Cooker) }).parse(answer.body)
    const found = items.find((item) => item.id === cooker(1))
    return [found?.pitSetC, found?.bandLowC, found?.bandHighC]
  }

  it('moves the set and its band, and back when it is taken back', async () => {
    expect(await pit()).toEqual([107, 99, 115])
    const up = await logged(onCooker({ happenedAt: ago(50), fact: { kind: 'pit_set', pitSetC: 121 } }))
    expect(await pit()).toEqual([121, 113, 129])
    // A late entry about something earlier changes nothing now.
    await logged(onCooker({ happenedAt: ago(70), fact: { kind: 'pit_set', pitSetC: 90 } }))
    expect(await pit()).toEqual([121, 113, 129])
    const fixed = await logged(
      onCooker({ happenedAt: ago(50), fact: { kind: 'pit_set', pitSetC: 118 }, correctsId: up.id }),
    )
    expect(await pit()).toEqual([118, 110, 126])
    await logged(onCooker({ fact: { kind: 'withdrawn' }, correctsId: fixed.id }))
    expect(await pit()).toEqual([107, 99, 115])
  })

  it('takes fire tending and notes, and nothing of a piece', async () => {
    const tended = await logged(onCooker({ fact: { kind: 'fire_tended' }, note: 'two splits' }))
    expect(tended).toMatchObject({ pieceId: null, cookerId: cooker(1) })
    await logged(onCooker({ fact: { kind: 'note' }, note: 'lid gasket leaks' }))
    await onCooker({ fact: { kind: 'spritz' } }).expect(422)
    await onCooker({ fact: { kind: 'fire_tended' }, happenedAt: ago(-5) }).expect(422)
  })
})

async function standing(piece: Piece) {
  const answer: unknown = await server.db.raw(
    `select cooker_id, upper_inf(during) as open from placements where piece_id = ? order by lower(during)`,
    [piece.id],
  )
  return z
    .object({ rows: z.array(z.object({ cooker_id: z.number(), open: z.boolean() })) })
    .parse(answer)
    .rows.map((row) => ({ cookerId: row.cooker_id, isOpen: row.open }))
}
