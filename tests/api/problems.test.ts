import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import { Problem } from '#shared/contract/common.ts'
import { cuttableProxy } from '../harness/cuttable-proxy.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let test: TestServer
beforeAll(async () => {
  test = await startTestServer()
})
afterAll(() => test.stop())

/** Checks that an answer is a problem of this status, and gives it. */
function problemOf(
  response: { status: number; type: string; body: unknown; get(name: string): unknown },
  status: number,
) {
  expect(response.status).toBe(status)
  expect(response.type).toBe('application/problem+json')
  expect(response.get('Cache-Control')).toBe('no-store')
  const problem = Problem.strict().parse(response.body)
  expect(problem.status).toBe(status)
  return problem
}

describe('a request that cannot be taken is answered as problem details', () => {
  it('when the address is unknown', async () => {
    problemOf(await test.api.get('/api/briskets'), 404)
    problemOf(await test.api.put('/api/session').send({}), 404)
    problemOf(await test.as('lead').get('/api/sites/%E0%A4%A/cookers'), 400)
  })

  it('when the body is no JSON', async () => {
    const response = await test.api.post('/api/session').type('json').send('{"email": ')
    expect(problemOf(response, 400).detail).toBe('The body is not JSON.')
  })

  it('when the body is of another kind', async () => {
    problemOf(await test.api.post('/api/session').type('form').send('email=a@b.example&password=c'), 415)
    problemOf(await test.api.post('/api/session').type('application/json; charset=utf-9').send('{}'), 415)
  })

  it('when the body is too large: 256 kB, and 64 kB for readings', async () => {
    const text = (kB: number) => JSON.stringify({ email: 'x'.repeat(kB * 1024) })
    problemOf(await test.api.post('/api/session').type('json').send(text(255)), 400)
    problemOf(await test.api.post('/api/session').type('json').send(text(257)), 413)
    problemOf(await test.api.post('/api/readings').type('json').send(text(65)), 413)
  })

  it('when a number is larger than a row’s can be', async () => {
    problemOf(await test.as('lead').patch('/api/cookers/99999999999').send({}), 404)
    const { id } = test.house.own.cookers[0] ?? { id: 0 }
    problemOf(await test.as('lead').put(`/api/cookers/${id}/probe`).send({ channelId: 99999999999 }), 400)
  })

  it('when a text holds what cannot be stored', async () => {
    const cooker = {
      name: 'Kettle\u0000',
      kind: 'kettle',
      capacity: 2,
      pitSetC: 121,
      bandLowC: 1,
      bandHighC: 2,
    }
    problemOf(await test.as('lead').post('/api/sites/quarry-road/cookers').send(cooker), 400)
  })
})

describe('with the database away', () => {
  it('answers 503 in plain words, and goes on once it is back', async () => {
    const directUrl = new URL(inject('postgresUrl'))
    const proxy = await cuttableProxy(directUrl.hostname, Number(directUrl.port))
    const behind = await startTestServer({}, { databasePort: proxy.port })
    await behind.as('lead').get('/api/sites').expect(200)

    await proxy.cut()
    const problem = problemOf(await behind.as('lead').get('/api/sites'), 503)
    expect(problem.detail).toBe('The database does not answer. Nothing was changed; try again shortly.')
    const health = await behind.api.get('/api/health').expect(503)
    expect(health.body).toMatchObject({ ok: false, database: { ok: false, detail: 'does not answer' } })

    await proxy.mend()
    await expect
      .poll(async () => (await behind.as('lead').get('/api/sites')).status, { timeout: 5000 })
      .toBe(200)
    await behind.stop()
    await proxy.cut()
  })
})
