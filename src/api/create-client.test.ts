import { describe, expect, it } from 'vitest'
import { cookerEndpoints } from '@/shared/contract/cooker.ts'
import { pieceEndpoints } from '@/shared/contract/piece.ts'
import { sessionEndpoints } from '@/shared/contract/session.ts'
import { ApiProblem } from './api-problem.ts'
import { addressOf, createClient } from './create-client.ts'

interface Request {
  method: string
  url: string
  headers: Headers
  body: unknown
}

const user = {
  id: 1,
  email: 'odell@quarryroad.example',
  name: 'Odell Sayer',
  preferences: { units: 'us', theme: 'system', locale: 'en' },
  sites: [],
}

/** A server made of answers by `METHOD path`; each may look at the request. */
function clientOf(answers: Record<string, (request: Request) => Response | Promise<Response>>) {
  const requests: Request[] = []
  const client = createClient({
    fetch: async (url, init) => {
      const request = {
        method: init.method ?? 'GET',
        url,
        headers: new Headers(init.headers),
        body: parsedBody(init),
      }
      requests.push(request)
      const answer = answers[`${request.method} ${url.split('?')[0] ?? ''}`]
      if (answer === undefined) throw new TypeError('fetch failed')
      return answer(request)
    },
  })
  return { client, requests }
}

function parsedBody(init: RequestInit): unknown {
  const body: unknown = typeof init.body === 'string' ? JSON.parse(init.body) : undefined
  return body
}

const json = (body: unknown, status = 200) => Response.json(body, { status })
const problem = (status: number, detail: string, errors?: { at: string; message: string }[]) =>
  json({ type: 'about:blank', title: 'No', status, detail, errors }, status)

/** The problem that a call ends in. */
async function problemOf(call: Promise<unknown>): Promise<ApiProblem> {
  const error: unknown = await call.then(
    () => new Error('the call succeeded'),
    (cause: unknown) => cause,
  )
  if (!(error instanceof ApiProblem)) throw error
  return error
}

const listCookers = { params: { site: 'quarry-road' } }

describe('a call', () => {
  it('sends parameters, query, body and version, and gives the parsed answer', async () => {
    const { client, requests } = clientOf({
      'PATCH /api/me/preferences': () => json(user),
      'GET /api/sites/quarry-road/pieces': () => json({ items: [], nextCursor: null }),
    })
    client.setToken('abc')
    const changed = await client.call(sessionEndpoints.setPreferences, { body: { units: 'si' }, ifMatch: 3 })
    const listed = await client.call(pieceEndpoints.list, {
      params: { site: 'quarry-road' },
      query: { which: 'done', limit: 20 },
    })
    expect(changed.name).toBe('Odell Sayer')
    expect(listed.items).toEqual([])
    expect(requests[0]?.body).toEqual({ units: 'si' })
    expect(requests[0]?.headers.get('if-match')).toBe('"3"')
    expect(requests[0]?.headers.get('authorization')).toBe('Bearer abc')
    expect(requests[1]?.url).toBe('/api/sites/quarry-road/pieces?which=done&limit=20')
  })

  it('turns a refusal into a problem with the server’s words and fields', async () => {
    const fields = [{ at: 'bandLowC', message: 'too high' }]
    const { client } = clientOf({
      'GET /api/sites/quarry-road/cookers': () => problem(412, 'Someone else changed it.', fields),
    })
    const refused = await problemOf(client.call(cookerEndpoints.list, listCookers))
    expect(refused).toMatchObject({
      kind: 'conflict',
      status: 412,
      message: 'Someone else changed it.',
      fields,
    })
  })

  it('says that the server cannot be reached', async () => {
    const { client } = clientOf({})
    expect(await problemOf(client.call(cookerEndpoints.list, listCookers))).toMatchObject({ kind: 'offline' })
  })

  it('does not pass on an answer that is not what the contract says', async () => {
    const { client } = clientOf({
      'GET /api/sites/quarry-road/cookers': () => json({ items: [{ id: 'x' }] }),
    })
    expect(await problemOf(client.call(cookerEndpoints.list, listCookers))).toMatchObject({
      kind: 'unreadable',
    })
  })

  it('copes with an error page that is no problem document', async () => {
    const { client } = clientOf({
      'GET /api/sites/quarry-road/cookers': () => new Response('<h1>Bad gateway</h1>', { status: 502 }),
    })
    expect(await problemOf(client.call(cookerEndpoints.list, listCookers))).toMatchObject({
      kind: 'server',
      status: 502,
    })
  })
})

describe('an access token that has run out', () => {
  it('is renewed once for all calls that find it out, and each call is made again', async () => {
    let renewed = 0
    const { client, requests } = clientOf({
      'GET /api/sites/quarry-road/cookers': ({ headers }) =>
        headers.get('authorization') === 'Bearer new' ? json({ items: [] }) : problem(401, 'Sign in.'),
      'POST /api/session/refresh': () => {
        renewed += 1
        return json({ token: 'new', expiresInS: 600, user })
      },
    })
    client.setToken('old')
    const calls = [1, 2, 3].map(() => client.call(cookerEndpoints.list, listCookers))
    expect(await Promise.all(calls)).toEqual([{ items: [] }, { items: [] }, { items: [] }])
    expect(renewed).toBe(1)
    expect(requests).toHaveLength(7)
  })

  it.each([
    ['nobody is signed in any more', () => json(null)],
    ['the cookie is refused', () => problem(401, 'Sign in.')],
  ])('ends the session when %s', async (_, refresh) => {
    const { client } = clientOf({
      'GET /api/sites/quarry-road/cookers': () => problem(401, 'Sign in.'),
      'POST /api/session/refresh': refresh,
    })
    let signedOut = 0
    client.onSignedOut(() => {
      signedOut += 1
    })
    client.setToken('old')
    expect(await problemOf(client.call(cookerEndpoints.list, listCookers))).toMatchObject({
      kind: 'signed-out',
    })
    expect(signedOut).toBe(1)
  })

  it('does not end the session when the server is only away', async () => {
    const { client } = clientOf({ 'GET /api/sites/quarry-road/cookers': () => problem(401, 'Sign in.') })
    let signedOut = 0
    client.onSignedOut(() => {
      signedOut += 1
    })
    expect(await problemOf(client.call(cookerEndpoints.list, listCookers))).toMatchObject({ kind: 'offline' })
    expect(signedOut).toBe(0)
  })

  it('is not renewed for a wrong password', async () => {
    const { client, requests } = clientOf({ 'POST /api/session': () => problem(401, 'They do not match.') })
    const body = { email: 'odell@quarryroad.example', password: 'not this' }
    expect(await problemOf(client.call(sessionEndpoints.signIn, { body }))).toMatchObject({
      message: 'They do not match.',
    })
    expect(requests).toHaveLength(1)
  })
})

describe('an address', () => {
  it('is filled with its parameters, made safe, and leaves out what is not given', () => {
    expect(addressOf('/api/sites/:site/pieces', { site: 'a b/c' }, { cursor: undefined, limit: 5 })).toBe(
      '/api/sites/a%20b%2Fc/pieces?limit=5',
    )
  })

  it('is not made without a parameter that it needs', () => {
    expect(() => addressOf('/api/pieces/:pieceId', {}, {})).toThrow('/api/pieces/:pieceId needs pieceId')
  })
})
