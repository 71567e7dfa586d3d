import { randomUUID } from 'node:crypto'
import { once } from 'node:events'
import { afterAll, afterEach, beforeAll, describe, expect, test } from 'vitest'
import { WebSocket } from 'ws'
import { closeCodes } from '#shared/contract/live.ts'
import { Piece } from '#shared/contract/piece.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, openSocket, ticketFor, watchSite, type Watcher } from './watch-site.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer()
})
afterAll(() => server.stop())

const opened: Watcher[] = []
const open = async (headers?: Record<string, string>) => {
  const watcher = await openSocket(server, headers)
  opened.push(watcher)
  return watcher
}
afterEach(() => {
  for (const watcher of opened.splice(0)) watcher.close()
})

describe('at the door', () => {
  test('a ticket is good once', async () => {
    const ticket = await ticketFor(server, 'crew')
    const first = await open()
    first.send({ type: 'hello', ticket })
    await first.until(({ type }) => type === 'welcome')
    const second = await open()
    second.send({ type: 'hello', ticket })
    expect(await closing(second.socket)).toBe(closeCodes.notSignedIn)
  })

  test('an invented ticket is not', async () => {
    const watcher = await open()
    watcher.send({ type: 'hello', ticket: 'let-me-in' })
    expect(await closing(watcher.socket)).toBe(closeCodes.notSignedIn)
  })

  test('whoever subscribes before saying hello is sent away', async () => {
    const watcher = await open()
    watcher.send({ type: 'subscribe', site: 'quarry-road' })
    expect(await closing(watcher.socket)).toBe(closeCodes.notSignedIn)
  })

  test('whoever says nothing for five seconds too', async () => {
    const watcher = await open()
    const begin = performance.now()
    expect(await closing(watcher.socket)).toBe(closeCodes.notSignedIn)
    expect(performance.now() - begin).toBeGreaterThan(4_900)
  })

  test.each(['{"type":"hello"}', 'nonsense', '{"type":"shout"}'])('%s is not this protocol', async (text) => {
    const watcher = await open()
    watcher.socket.send(text)
    expect(await closing(watcher.socket)).toBe(1008)
  })

  test('a message of 10 kB is too long', async () => {
    const watcher = await open()
    watcher.send({ type: 'hello', ticket: 'x'.repeat(10_000) })
    expect(await closing(watcher.socket)).toBe(1009)
  })

  test('a page of another origin may not connect, one of this server may', async () => {
    await expect(open({ Origin: 'https://elsewhere.example' })).rejects.toThrow('403')
    await open({ Origin: server.url })
  })

  test('another path is not found', async () => {
    const socket = new WebSocket(server.url.replace('http', 'ws') + '/other')
    const error: unknown = (await once(socket, 'error'))[0]
    expect(String(error)).toContain('404')
  })
})

describe('a room', () => {
  test('of a foreign site, or of none, is refused', async () => {
    const watcher = await watchSite(server)
    opened.push(watcher)
    for (const site of ['mill-yard', 'nowhere']) {
      watcher.send({ type: 'subscribe', site })
      await watcher.until((message) => message.type === 'refused' && message.site === site)
    }
  })

  test('is told what changed in its own site only', async () => {
    const watcher = await watchSite(server)
    opened.push(watcher)
    server.server.services.bus.publish('mill-yard', { readings: [[1, 1, 99]] })
    server.server.services.bus.publish('quarry-road', { readings: [[2, 2, 55]] })
    const frame = await watcher.until(({ type }) => type === 'delta')
    expect(frame).toMatchObject({ site: 'quarry-road', changes: { readings: [[2, 2, 55]] } })
  })

  test('counts its frames one by one after the snapshot, at most ten a second', async () => {
    const watcher = await watchSite(server)
    opened.push(watcher)
    const begin = performance.now()
    let at = 0
    while (performance.now() - begin < 1_000) {
      server.server.services.bus.publish('quarry-road', { readings: [[2, ++at, 55]] })
      await new Promise((resolve) => setTimeout(resolve, 5))
    }
    await watcher.until(
      (message) => message.type === 'delta' && message.changes.readings?.some(([, ms]) => ms === at) === true,
    )
    const numbers = watcher.messages.flatMap((message) => ('seq' in message ? [message.seq] : []))
    expect(numbers).toEqual(numbers.map((_, index) => (numbers[0] ?? 0) + index))
    const frames = watcher.messages.filter(({ type }) => type === 'delta').length
    expect(frames).toBeGreaterThanOrEqual(6)
    expect(frames).toBeLessThanOrEqual(12)
  })

  test('tells a page that nobody sees what changes its title, and nothing else', async () => {
    const { bus, tonight } = server.server.services
    const started = await server
      .as('lead')
      .post('/api/sites/quarry-road/pieces')
      .send({
        eventId: randomUUID(),
        label: 'T1',
        recipeId: server.house.recipes[0]?.id,
        cookerId: server.house.own.cookers[0]?.id,
        rawKg: 6,
        onAt: new Date(systemClock.now()).toISOString(),
      })
      .expect(201)
    const piece = Piece.parse(started.body)
    const watcher = await watchSite(server)
    opened.push(watcher)
    watcher.send({ type: 'attention', visible: false })
    // Answered after it, so that what follows is sent to a hidden page.
    watcher.send({ type: 'snapshot', site: 'quarry-road' })
    await watcher.until(({ type }) => type === 'title')
    const before = watcher.messages.length
    bus.publish('quarry-road', { readings: [[2, 2, 55]] })
    await new Promise((resolve) => setTimeout(resolve, 400))
    expect(watcher.messages.slice(before)).toEqual([])

    const at = Math.ceil(systemClock.now() / 60_000) * 60_000 + 3_600_000
    const reach = new Date(at).toISOString()
    const times = { p10: reach, p25: reach, p50: reach, p75: reach, p90: reach }
    bus.publish('quarry-road', {
      forecasts: [
        {
          ...{ pieceId: piece.id, madeAt: piece.onAt ?? reach, phase: 'rise', fan: [], pullMovedMin: null },
          ...{ wrap: times, wrapReason: null, wrapReachedAt: null, pull: times, pullReason: null },
        },
      ],
    })
    const title = await watcher.until((message) => message.type === 'title' && message.next !== null)
    expect(title).toMatchObject({ next: { kind: 'wrap', subject: 'T1', at } })
    expect(watcher.messages.slice(before).map(({ type }) => type)).toEqual(['title'])

    watcher.send({ type: 'attention', visible: true })
    await watcher.until(
      (message) => watcher.messages.indexOf(message) > before && message.type === 'snapshot',
    )
    bus.publish('quarry-road', { readings: [[2, 3, 56]] })
    await watcher.until((message) => message.type === 'delta' && message.changes.readings?.[0]?.[2] === 56)
    expect((await tonight.ofSite('quarry-road')).pieces.map(({ id }) => id)).toContain(piece.id)
  })

  test('sends nothing when nothing changes, and nothing after leaving', async () => {
    const watcher = await watchSite(server)
    opened.push(watcher)
    const before = watcher.messages.length
    await new Promise((resolve) => setTimeout(resolve, 500))
    expect(watcher.messages).toHaveLength(before)
    const other = await watchSite(server)
    opened.push(other)
    watcher.send({ type: 'unsubscribe', site: 'quarry-road' })
    watcher.send({ type: 'snapshot', site: 'quarry-road' })
    await watcher.until(({ type }) => type === 'refused')
    server.server.services.bus.publish('quarry-road', { readings: [[2, 2, 55]] })
    await other.until(({ type }) => type === 'delta')
    expect(watcher.messages.filter(({ type }) => type === 'delta')).toEqual([])
  })

  test('gives a snapshot again when asked', async () => {
    const watcher = await watchSite(server)
    opened.push(watcher)
    watcher.send({ type: 'snapshot', site: 'quarry-road' })
    await watcher.until(() => watcher.messages.filter(({ type }) => type === 'snapshot').length === 2)
  })
})
