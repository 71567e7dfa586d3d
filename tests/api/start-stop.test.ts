import { request as httpRequest } from 'node:http'
import { createServer } from 'node:net'
import { text } from 'node:stream/consumers'
import pg from 'pg'
import { pino } from 'pino'
import supertest from 'supertest'
import { expect, inject, it } from 'vitest'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../server/compose.ts'
import { PortTaken } from '../../server/listen.ts'
import { freshDatabase } from '../harness/postgres.ts'
import { startTestServer } from '../harness/server.ts'

const usual = {
  log: pino({ level: 'silent' }),
  clock: systemClock,
  tokenKey: 'a key for tests only, of no use elsewhere',
  build: 'test',
}

it.each(['PORT', 'MQTT_PORT'] as const)(
  'says which port is in use, and leaves nothing open (%s)',
  async (setting) => {
    const holder = createServer().listen(0, '127.0.0.1')
    await new Promise((resolve) => holder.once('listening', resolve))
    const taken = { host: '127.0.0.1', port: z.object({ port: z.number() }).parse(holder.address()).port }
    const free = { host: '127.0.0.1', port: 0 }
    const database = await freshDatabase()

    const server = composeServer({
      ...usual,
      databaseUrl: database.url,
      http: setting === 'PORT' ? taken : free,
      mqtt: setting === 'PORT' ? free : taken,
    })
    const failed: unknown = await server.start().catch((error: unknown) => error)
    expect(failed).toBeInstanceOf(PortTaken)
    expect(failed).toMatchObject({ port: taken.port, message: expect.stringContaining(setting) as unknown })

    await expect.poll(() => connectionsTo(database.url)).toBe(0)
    await database.drop()
    await new Promise((resolve) => holder.close(resolve))
  },
)

it('answers what is under way, then stops, and stops but once', async () => {
  const test = await startTestServer()
  const { username, secret } = test.house.own.device
  const pack = JSON.stringify([{ n: '1', u: 'Cel', v: 121.5 }])
  const request = httpRequest(`${test.url}/api/readings`, {
    method: 'POST',
    auth: `${username}:${secret}`,
    headers: { 'Content-Type': 'application/json', 'Content-Length': pack.length },
  })
  const answer = new Promise<string>((resolve, reject) => {
    request.once('error', reject)
    request.once('response', (response) => void text(response).then(resolve, reject))
  })
  // The server has seen half of the request when it is told to stop.
  await new Promise((resolve) => request.write(pack.slice(0, 10), resolve))
  const stopped = Promise.all([test.server.stop(), test.server.stop()])
  await expect.poll(() => supertest(test.url).get('/api/house').catch(String)).toMatch(/ECONNREFUSED/)
  request.end(pack.slice(10))

  expect(JSON.parse(await answer)).toEqual({ stored: 1, duplicates: 0, rejected: [] })
  await stopped
  expect(await test.db('readings').count({ rows: '*' })).toEqual([{ rows: 1 }])
  await test.stop()
})

it('gives up its jobs and closes their connections when it stops', async () => {
  const test = await startTestServer({ jobs: {} })
  const jobs = () =>
    test.db('pg_stat_activity').where({ application_name: 'coalhand jobs' }).count({ count: '*' })
  await expect.poll(jobs).not.toEqual([{ count: 0 }])
  const begun = systemClock.now()
  await test.server.stop()
  // What is being done may end; nothing here takes long.
  expect(systemClock.now() - begun).toBeLessThan(5000)
  await expect.poll(jobs).toEqual([{ count: 0 }])
  const locked = await test
    .db('graphile_worker._private_jobs')
    .whereNotNull('locked_by')
    .count({ count: '*' })
  expect(locked).toEqual([{ count: 0 }])
  await test.stop()
})

/** How many are signed in to a database. */
async function connectionsTo(databaseUrl: string): Promise<number> {
  const client = new pg.Client({ connectionString: inject('postgresUrl') })
  await client.connect()
  const name = new URL(databaseUrl).pathname.slice(1)
  const { rowCount } = await client.query('select from pg_stat_activity where datname = $1', [name])
  await client.end()
  return rowCount ?? 0
}
