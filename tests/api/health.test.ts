import { afterAll, beforeAll, expect, it } from 'vitest'
import supertest from 'supertest'
import { Health } from '#shared/contract/health.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const clock = settableClock(Date.UTC(2026, 11, 1, 4, 35))
let test: TestServer
beforeAll(async () => {
  test = await startTestServer({ clock, mqtt: { host: '127.0.0.1', port: 0 }, jobs: {} })
})
afterAll(() => test.stop())

const health = async () => Health.parse((await test.api.get('/api/health').expect(200)).body)

it('tells whether each part works, what was built and since when it runs', async () => {
  expect(await health()).toMatchObject({
    ok: true,
    build: 'test',
    startedAt: '2026-12-01T04:35:00.000Z',
    database: { ok: true },
    broker: { ok: true, detail: `listens on port ${test.mqttPort}`, clients: 0 },
    ingest: { ok: true, waiting: 0 },
    newestReadingAt: null,
  })
  await expect
    .poll(async () => (await health()).forecast, { timeout: 10_000 })
    .toMatchObject({ ok: true, detail: '0 pieces forecast', pieces: 0 })
})

it('tells how fresh the newest reading is, late ones aside', async () => {
  const { username, secret } = test.house.own.device
  const send = (secondsAgo: number) =>
    supertest(test.url)
      .post('/api/readings')
      .auth(username, secret)
      .send([{ n: '1', u: 'Cel', v: 121 + secondsAgo / 1000, bt: clock.now() / 1000 - secondsAgo }])
      .expect(200)
  await send(7)
  await send(3600)
  const told = await health()
  expect(told.newestReadingAt).toBe('2026-12-01T04:34:53.000Z')
  expect(told.ingest.delayMedianMs).toBeGreaterThan(0)
})
