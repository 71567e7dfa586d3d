import { createHash } from 'node:crypto'
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest'
import supertest from 'supertest'
import { Problem } from '#shared/contract/common.ts'
import { House, Session } from '#shared/contract/session.ts'
import { settableClock } from '#shared/domain/clock.ts'
import { housePassword } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const day = 24 * 3600 * 1000
const clock = settableClock(Date.UTC(2026, 11, 1, 4, 35))
let test: TestServer

beforeAll(async () => {
  test = await startTestServer({
    clock,
    signInLimit: { windowMs: 60_000, perAddress: 1000, perAccount: 1000 },
  })
})
afterAll(() => test.stop())

const signIn = async (email = test.house.people.lead.email) => {
  const response = await test.api.post('/api/session').send({ email, password: housePassword }).expect(200)
  return { session: Session.parse(response.body), cookie: cookieOf(response) }
}
const refresh = (cookie: string) => supertest(test.url).post('/api/session/refresh').set('Cookie', cookie)
const mySites = (token: string) => test.api.get('/api/sites').set('Authorization', `Bearer ${token}`)

describe('signing in', () => {
  it('gives an access token and says who one is and where', async () => {
    const { session } = await signIn('LEAD@quarryroad.example')
    expect(session.user).toMatchObject({
      email: 'lead@quarryroad.example',
      preferences: { units: 'us', theme: 'system', locale: 'en' },
      sites: [{ slug: 'quarry-road', name: 'Quarry Road', timeZone: 'America/Chicago', roles: ['lead'] }],
    })
    await mySites(session.token).expect(200)
  })

  it('keeps the refresh token in a cookie that scripts and other sites cannot use', async () => {
    const response = await test.api
      .post('/api/session')
      .send({ email: test.house.people.crew.email, password: housePassword })
    const [cookie = ''] = response.get('Set-Cookie') ?? []
    expect(cookie).toMatch(/; Path=\/api\/session;/)
    expect(cookie).toContain('; HttpOnly')
    expect(cookie).toContain('; SameSite=Strict')
    expect(cookie).toContain('; Max-Age=2592000')
    const [, token = ''] = cookieOf(response).split('=')
    const stored = (value: Buffer) => test.db('refresh_tokens').where('token_hash', value)
    expect(await stored(Buffer.from(token))).toHaveLength(0)
    expect(await stored(createHash('sha256').update(token).digest())).toHaveLength(1)
  })

  it.each([
    ['a wrong password', { email: 'lead@quarryroad.example', password: 'not this one' }],
    ['an unknown address', { email: 'nobody@quarryroad.example', password: housePassword }],
  ])('refuses %s with the same words', async (_, attempt) => {
    const response = await test.api.post('/api/session').send(attempt).expect(401)
    expect(Problem.parse(response.body)).toEqual({
      type: 'about:blank',
      title: 'Not signed in',
      status: 401,
      detail: 'That e-mail address and password do not go together.',
    })
    expect(response.get('Set-Cookie')).toBeUndefined()
  })

  it('refuses whoever was disabled, also with a token from before', async () => {
    const { session, cookie } = await signIn(test.house.people.prep.email)
    await test
      .db('users')
      .where({ id: test.house.people.prep.id })
      .update({ disabled_at: new Date(clock.now()) })
    await mySites(session.token).expect(401)
    await refresh(cookie).expect(401)
    const attempt = { email: test.house.people.prep.email, password: housePassword }
    await test.api.post('/api/session').send(attempt).expect(401)
    await test.db('users').where({ id: test.house.people.prep.id }).update({ disabled_at: null })
  })
})

describe('an access token', () => {
  it('lasts fifteen minutes', async () => {
    const { session } = await signIn()
    clock.advance(14.9 * 60_000)
    await mySites(session.token).expect(200)
    clock.advance(0.2 * 60_000)
    await mySites(session.token).expect(401)
  })

  it('is good for nothing when its signature or key is another', async () => {
    const { session } = await signIn()
    const [head = '', claims = ''] = session.token.split('.')
    await mySites(`${head}.${claims}.${'A'.repeat(43)}`).expect(401)
    const unsigned = Buffer.from('{"alg":"none","typ":"JWT"}').toString('base64url')
    await mySites(`${unsigned}.${claims}.`).expect(401)
  })

  it('carries no roles: a role that is taken away counts at once', async () => {
    const { session } = await signIn(test.house.people.display.email)
    const held = { user_id: test.house.people.display.id, site_id: test.house.own.id }
    const cookers = () =>
      test.api.get('/api/sites/quarry-road/cookers').set('Authorization', `Bearer ${session.token}`)
    await cookers().expect(200)
    await test.db('site_roles').where(held).delete()
    await cookers().expect(404)
    await test.db('site_roles').insert({ ...held, role: 'display' })
    await cookers().expect(200)
  })
})

describe('the refresh cookie', () => {
  it('gives a new access token and is replaced', async () => {
    const { cookie } = await signIn()
    const response = await refresh(cookie).expect(200)
    expect(Session.parse(response.body).user.email).toBe('lead@quarryroad.example')
    expect(cookieOf(response)).not.toBe(cookie)
    await refresh(cookieOf(response)).expect(200)
  })

  it('serves two tabs that send the same one at the same moment', async () => {
    const { cookie } = await signIn()
    const [one, other] = await Promise.all([refresh(cookie), refresh(cookie)])
    expect([one.status, other.status]).toEqual([200, 200])
    expect(cookieOf(one)).not.toBe(cookieOf(other))
    clock.advance(60_000)
    await refresh(cookieOf(one)).expect(200)
    await refresh(cookieOf(other)).expect(200)
  })

  it('ends the whole family when a used one comes again later, and writes it down', async () => {
    const { cookie } = await signIn(test.house.people.engineer.email)
    const next = cookieOf(await refresh(cookie).expect(200))
    clock.advance(21_000)
    await refresh(cookie).expect(401)
    await refresh(next).expect(401)
    const entries = await test.db('audit_entries').where({ action: 'session.reused' })
    expect(entries).toMatchObject([{ user_id: test.house.people.engineer.id }])
  })

  it('lasts thirty days from its last use', async () => {
    const { cookie } = await signIn()
    clock.advance(29 * day)
    const next = cookieOf(await refresh(cookie).expect(200))
    clock.advance(29 * day)
    const last = cookieOf(await refresh(next).expect(200))
    clock.advance(30 * day)
    await refresh(last).expect(401)
  })

  it('is refused when it is missing or made up', async () => {
    await supertest(test.url).post('/api/session/refresh').expect(200, 'null')
    await refresh(`coalhand_refresh=${'A'.repeat(43)}`).expect(401)
  })

  it('is no longer good after signing out, nor is any other of its family', async () => {
    const { cookie } = await signIn()
    const next = cookieOf(await refresh(cookie).expect(200))
    const response = await supertest(test.url).delete('/api/session').set('Cookie', next).expect(204)
    expect(response.get('Set-Cookie')?.[0]).toMatch(/^coalhand_refresh=;.*Expires=Thu, 01 Jan 1970/)
    await refresh(next).expect(401)
    await refresh(cookie).expect(401)
  })

  it('is only sent over HTTPS once the house has an HTTPS address', async () => {
    const secure = await startTestServer({ publicUrl: 'https://pits.quarryroad.example' })
    const attempt = { email: secure.house.people.lead.email, password: housePassword }
    const response = await secure.api.post('/api/session').send(attempt).expect(200)
    expect(response.get('Set-Cookie')?.[0]).toContain('; Secure')
    await secure.stop()
  })
})

describe('too many tries', () => {
  let limited: TestServer
  beforeEach(async () => {
    limited = await startTestServer({ signInLimit: { windowMs: 60_000, perAddress: 5, perAccount: 2 } })
    return () => limited.stop()
  })
  const attempt = (email: string, password = 'wrong') =>
    limited.api.post('/api/session').send({ email, password })

  it('close an account for a while, and say for how long', async () => {
    const { email } = limited.house.people.owner
    await attempt(email).expect(401)
    await attempt(email.toUpperCase()).expect(401)
    const refused = await attempt(email, housePassword).expect(429)
    expect(Problem.parse(refused.body)).toMatchObject({ title: 'Too many tries', status: 429 })
    expect(refused.type).toBe('application/problem+json')
    const seconds = Number(refused.get('Retry-After'))
    expect(seconds).toBeGreaterThan(0)
    expect(seconds).toBeLessThanOrEqual(60)
    await attempt(limited.house.people.crew.email, housePassword).expect(200)
  })

  it('close an address that tries one account after the other', async () => {
    for (const name of ['a', 'b', 'c', 'd', 'e']) await attempt(`${name}@quarryroad.example`).expect(401)
    await attempt(limited.house.people.crew.email, housePassword).expect(429)
  })

  it('cannot be hidden behind a made-up address; behind a proxy each address counts for itself', async () => {
    const from = (server: TestServer, address: string) =>
      server.api
        .post('/api/session')
        .set('X-Forwarded-For', address)
        .send({ email: `${address}@quarryroad.example`, password: 'wrong' })
    const limit = { windowMs: 60_000, perAddress: 2, perAccount: 9 }
    const direct = await startTestServer({ signInLimit: limit })
    const proxied = await startTestServer({ signInLimit: limit, trustProxy: 1 })
    const addresses = ['203.0.113.1', '203.0.113.2', '203.0.113.3']
    const statuses = async (server: TestServer) => {
      const found: number[] = []
      for (const address of addresses) found.push((await from(server, address)).status)
      return found
    }
    expect(await statuses(direct)).toEqual([401, 401, 429])
    expect(await statuses(proxied)).toEqual([401, 401, 401])
    await direct.stop()
    await proxied.stop()
  })

  it('do not come from signing in rightly', async () => {
    for (let time = 0; time < 8; time++)
      await attempt(limited.house.people.crew.email, housePassword).expect(200)
  })
})

describe('preferences', () => {
  it('are kept, each by itself', async () => {
    await test.as('manager').patch('/api/me/preferences').send({ units: 'si' }).expect(200)
    const response = await test.as('manager').patch('/api/me/preferences').send({ locale: 'es' }).expect(200)
    expect(response.body).toMatchObject({ preferences: { units: 'si', theme: 'system', locale: 'es' } })
    await test.as('manager').patch('/api/me/preferences').send({}).expect(200)
  })

  it('are refused when there is no such thing', async () => {
    const response = await test
      .as('manager')
      .patch('/api/me/preferences')
      .send({ theme: 'neon', size: 3 })
      .expect(400)
    expect(Problem.parse(response.body).errors).toEqual([
      { at: 'theme', message: 'This must be one of: night, paper, system.' },
      { at: '', message: 'There is no field called size here.' },
    ])
  })
})

describe('the house', () => {
  it('tells nothing of accounts outside the demo', async () => {
    const response = await test.api.get('/api/house').expect(200)
    expect(House.parse(response.body)).toEqual({ name: 'Quarry Road', build: 'test', demo: null })
  })

  it('shows the accounts of the demo house', async () => {
    const accounts = [
      { email: 'w@quarryroad.example', name: 'Wren Castell', does: 'Night hand', role: 'crew' as const },
    ]
    const demo = await startTestServer({
      demo: { name: 'Quarry Road Smokehouse', password: 'embers', accounts },
    })
    const response = await demo.api.get('/api/house').expect(200)
    expect(response.body).toMatchObject({
      name: 'Quarry Road Smokehouse',
      demo: { password: 'embers', accounts },
    })
    await demo.stop()
  })
})

describe('a ticket for live changes', () => {
  it('is given to whoever is signed in, another one each time', async () => {
    const one = await test.as('display').post('/api/live/ticket').expect(200)
    const other = await test.as('display').post('/api/live/ticket').send({}).expect(200)
    expect(one.body).toEqual({ ticket: expect.stringMatching(/^[\w-]{43}$/) as unknown })
    expect(other.body).not.toEqual(one.body)
    await test.api.post('/api/live/ticket').expect(401)
  })
})

/** The name and value of the refresh cookie that an answer sets. */
function cookieOf(response: supertest.Response): string {
  const [cookie = ''] = response.get('Set-Cookie') ?? []
  return cookie.split(';')[0] ?? ''
}
