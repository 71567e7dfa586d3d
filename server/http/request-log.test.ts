import express from 'express'
import { pino } from 'pino'
import supertest from 'supertest'
import { beforeEach, expect, it } from 'vitest'
import { z } from 'zod'
import { requestLog } from './request-log.ts'

const Line = z.looseObject({ level: z.number(), msg: z.string() })
let text = ''

const app = express()
app.use(requestLog(pino({ level: 'debug' }, { write: (line: string) => void (text += line) })))
app.use((request, response) => {
  response.cookie('coalhand_refresh', 'cookie-set-secret')
  response.status(Number(request.query['status'] ?? 200)).end()
})

beforeEach(() => {
  text = ''
})

const lines = () =>
  text
    .trim()
    .split('\n')
    .map((line) => Line.parse(JSON.parse(line)))
const level = { debug: 20, info: 30, warn: 40 }

it('never writes tokens, cookies, bodies or what stands in a query', async () => {
  await supertest(app)
    .post('/api/session?q=query-secret')
    .set('Authorization', 'Bearer token-secret')
    .set('Cookie', 'coalhand_refresh=cookie-secret')
    .send({ password: 'body-secret' })
  expect(lines()).toHaveLength(1)
  expect(lines()[0]).toMatchObject({ level: level.info, msg: 'POST /api/session 200' })
  expect(text).not.toContain('secret')
})

it.each([
  ['a change', 'post', '/api/pieces/7/events', 200, level.info],
  ['a refused change', 'post', '/api/pieces/7/events', 409, level.info],
  ['a read', 'get', '/api/sites', 200, level.debug],
  ['an asset', 'get', '/assets/a.js', 200, level.debug],
  ['readings over HTTP', 'post', '/api/readings', 200, level.debug],
  ['a page that looks whether somebody is signed in', 'post', '/api/session/refresh', 401, level.debug],
  ['a failure', 'get', '/api/sites', 503, level.warn],
] as const)('gives %s its level', async (_, method, path, status, wanted) => {
  await supertest(app)[method](path).query({ status })
  expect(lines()).toMatchObject([{ level: wanted, msg: `${method.toUpperCase()} ${path} ${status}` }])
})
