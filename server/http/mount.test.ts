import express, { Router } from 'express'
import supertest from 'supertest'
import { beforeEach, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { NoBody, Nothing, PathId } from '#shared/contract/common.ts'
import { atSite, endpoint } from '#shared/contract/endpoint.ts'
import type { Role } from '#shared/domain/permissions.ts'
import { errorHandler } from './error-handler.ts'
import { createMount, type Guard, type Mount } from './mount.ts'
import { HttpProblem } from './problem.ts'

const lines: string[] = []
const log = {
  error: (_details: object, message: string) => lines.push(`error ${message}`),
  warn: (_details: object, message: string) => lines.push(`warn ${message}`),
}

/** Site 1 has thing 7; whoever says `Bearer lead` is a lead there. */
const guard: Guard = {
  person: (request) => {
    const role = request.get('Authorization')?.replace('Bearer ', '')
    const held: Role[] = role === 'lead' ? ['lead'] : role === 'display' ? ['display'] : []
    const person = { userId: 3, name: 'Odell Sayer', rolesBySite: new Map([[1, held]]) }
    return Promise.resolve(role === undefined ? undefined : person)
  },
  device: (request) =>
    Promise.resolve(
      request.get('Authorization') === 'Basic box'
        ? { deviceId: 5, username: 'box', deviceSlug: 'box', siteId: 1, siteSlug: 'yard' }
        : undefined,
    ),
  siteOf: (source, value) =>
    Promise.resolve(
      source === 'pieceId' && value === '7'
        ? { id: 1, slug: 'yard', name: 'Yard', timeZone: 'America/Chicago' }
        : undefined,
    ),
}

const common = { tag: 'Things', summary: 'A thing', query: Nothing, body: NoBody, status: 200 as const }
const change = endpoint({
  ...common,
  method: 'patch',
  path: '/things/:pieceId',
  access: atSite('piece.edit', 'pieceId'),
  params: z.object({ pieceId: PathId }),
  query: z.object({ often: z.coerce.number().int().min(1).default(1) }),
  body: z.strictObject({
    name: z.string().max(5),
    weights: z.array(z.object({ kg: z.number() })).optional(),
  }),
  response: z.object({ version: z.int(), name: z.string() }),
  versioned: true,
})
const show = endpoint({
  ...common,
  method: 'get',
  path: '/things/:pieceId',
  access: atSite('site.view', 'pieceId'),
  params: z.object({ pieceId: PathId }),
  response: z.object({ piece: z.object({ version: z.int() }), by: z.string() }),
  versioned: true,
})
const remove = endpoint({
  ...common,
  method: 'delete',
  path: '/things',
  access: { kind: 'signed-in' },
  params: Nothing,
  response: NoBody,
  status: 204,
})
const send = endpoint({
  ...common,
  method: 'post',
  path: '/things',
  access: { kind: 'device' },
  params: Nothing,
  response: z.object({ from: z.string() }),
})

let api: ReturnType<typeof supertest>
let mount: Mount

beforeEach(() => {
  lines.length = 0
  const app = express()
  const router = Router()
  mount = createMount(router, guard, { checkAnswers: true, patienceMs: 400 })
  app.use(express.json(), router, errorHandler(log))
  api = supertest(app)
})

const patch = (role = 'lead') => api.patch('/things/7').set('Authorization', `Bearer ${role}`)

describe('who asks', () => {
  beforeEach(() => {
    mount(change, ({ body, version }) => ({ version: version + 1, name: body.name }))
    mount(send, ({ device }) => ({ from: device.deviceSlug }))
  })

  it('is told to sign in, and how', async () => {
    const response = await api.patch('/things/7').send({}).expect(401)
    expect(response.get('WWW-Authenticate')).toBe('Bearer realm="Coalhand"')
    expect(response.type).toBe('application/problem+json')
  })

  it('gets one answer for what is not there and for what they may not see', async () => {
    const missing = await api.patch('/things/8').set('Authorization', 'Bearer lead').expect(404)
    const hidden = await patch('stranger').expect(404)
    expect(hidden.body).toEqual(missing.body)
  })

  it('is refused when the role they have does not allow it', async () => {
    await patch('display').expect(403)
  })

  it('may be a device', async () => {
    const response = await api.post('/things').set('Authorization', 'Basic box').expect(200)
    expect(response.body).toEqual({ from: 'box' })
    const refused = await api.post('/things').set('Authorization', 'Bearer lead').expect(401)
    expect(refused.get('WWW-Authenticate')).toBe('Basic realm="Coalhand devices", charset="UTF-8"')
  })
})

it('is told in time that an answer takes too long; what comes late is left', async () => {
  let done: Promise<void> | undefined
  mount(send, ({ response }) => {
    done = new Promise((resolve) => setTimeout(resolve, 600)).then(() => {
      response.set('X-Late', 'yes')
    })
    return done.then(() => ({ from: 'too late' }))
  })
  const response = await api.post('/things').set('Authorization', 'Basic box').expect(503)
  expect(response.type).toBe('application/problem+json')
  await expect(done).rejects.toThrow(/after they are sent/)
  expect(lines.filter((line) => line.startsWith('error'))).toEqual([])
})

describe('what was sent', () => {
  beforeEach(() => {
    mount(change, ({ params, query, body, version }) => ({
      version: version + 1,
      name: `${body.name} of ${params.pieceId}, ${query.often} times`,
    }))
  })

  it('arrives parsed', async () => {
    const response = await patch()
      .query({ often: '3' })
      .set('If-Match', '"4"')
      .send({ name: 'N1' })
      .expect(200)
    expect(response.body).toEqual({ version: 5, name: 'N1 of 7, 3 times' })
    expect(response.get('ETag')).toBe('"5"')
  })

  it('is refused with every field that is wrong, in words', async () => {
    const response = await patch()
      .query({ often: '0' })
      .set('If-Match', '"4"')
      .send({ name: 'N1' })
      .expect(400)
    expect(response.body).toMatchObject({ errors: [{ at: '?often', message: 'This must be at least 1.' }] })
    const body = await patch()
      .set('If-Match', '"4"')
      .send({ name: 'a long name', weights: [{ kg: 1 }, { kg: 'much' }], size: 1 })
      .expect(400)
    expect(body.body).toEqual({
      type: 'about:blank',
      title: 'That request cannot be read',
      status: 400,
      detail:
        'name: This must have at most 5 characters. weights.1.kg: This must be a number. ' +
        'There is no field called size here.',
      errors: [
        { at: 'name', message: 'This must have at most 5 characters.' },
        { at: 'weights.1.kg', message: 'This must be a number.' },
        { at: '', message: 'There is no field called size here.' },
      ],
    })
    const nothing = await patch().set('If-Match', '"4"').expect(400)
    expect(nothing.body).toMatchObject({ errors: [{ at: '', message: 'This is missing.' }] })
  })

  it('must name the version that it changes', async () => {
    await patch().send({ name: 'N1' }).expect(428)
    await patch().set('If-Match', '*').send({ name: 'N1' }).expect(400)
    await patch().set('If-Match', '"4", "5"').send({ name: 'N1' }).expect(400)
    await patch().set('If-Match', 'W/"4"').send({ name: 'N1' }).expect(200)
  })
})

describe('the answer', () => {
  it('is sent whole to whoever has seen that version: other parts of it may have changed', async () => {
    mount(show, ({ person }) => ({ piece: { version: 9 }, by: person.name }))
    const get = () => api.get('/things/7').set('Authorization', 'Bearer display')
    const response = await get().set('If-None-Match', '"9"').expect(200)
    expect(response.body).toEqual({ piece: { version: 9 }, by: 'Odell Sayer' })
    expect(response.get('ETag')).toBe('"9"')
  })

  it('may be nothing', async () => {
    mount(remove, () => undefined)
    const response = await api.delete('/things').set('Authorization', 'Bearer lead').send({}).expect(204)
    expect(response.text).toBe('')
  })

  it('is an error, told in the log only, when it breaks the contract', async () => {
    // What a repository may hand on by mistake: TypeScript lets further fields through.
    const tooMuch = { version: 1, name: 'N1', secret: 'x' }
    mount(change, () => tooMuch)
    const response = await patch().set('If-Match', '"1"').send({ name: 'N1' }).expect(500)
    expect(response.body).toMatchObject({ title: 'Something went wrong here', status: 500 })
    expect(response.text).not.toContain('contract')
    expect(lines).toEqual(['error A request failed'])
  })
})

describe('an error', () => {
  const failing = async (error: unknown) => {
    mount(remove, () => {
      throw error
    })
    return api.delete('/things').set('Authorization', 'Bearer lead')
  }

  it('of the caller’s is told', async () => {
    const response = await failing(
      new HttpProblem(409, 'Taken', 'N1 stands there.', [{ at: 'x', message: 'y' }]),
    )
    expect(response.status).toBe(409)
    expect(response.body).toMatchObject({ title: 'Taken', detail: 'N1 stands there.', errors: [{ at: 'x' }] })
    expect(lines).toEqual([])
  })

  it('of ours is hidden', async () => {
    const response = await failing(new Error('password of the database is x'))
    expect(response.status).toBe(500)
    expect(response.text).not.toContain('password')
    expect(lines).toEqual(['error A request failed'])
  })

  it.each([
    ['a refused connection', Object.assign(new Error('connect'), { code: 'ECONNREFUSED' })],
    ['a server shutting down', Object.assign(new Error('terminating'), { code: '57P01' })],
    ['a pool that waits in vain', Object.assign(new Error('Timeout'), { name: 'KnexTimeoutError' })],
    ['a broken connection', new Error('Connection terminated unexpectedly')],
  ])('that says the database is away (%s) is a 503 in plain words', async (_, error) => {
    const response = await failing(error)
    expect(response.status).toBe(503)
    expect(response.body).toMatchObject({ detail: expect.stringContaining('database') as unknown })
    expect(lines).toEqual(['warn Not available just now'])
  })

  it.each([
    ['a number beyond a column', '22003'],
    ['a text with U+0000', '22021'],
  ])('of the database that the caller made (%s) is told', async (_, code) => {
    const response = await failing(Object.assign(new Error('x'), { code }))
    expect(response.status).toBe(400)
  })
})
