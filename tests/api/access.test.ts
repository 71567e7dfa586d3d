import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import supertest from 'supertest'
import type { Endpoint, SiteAccess, SiteSource } from '#shared/contract/endpoint.ts'
import { allEndpoints } from '#shared/contract/endpoints.ts'
import { matrix, may, roles } from '#shared/domain/permissions.ts'
import { makePiece, type HouseSite } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let test: TestServer
/** What each path parameter may be, by site. */
let things: Record<'own' | 'foreign', Record<SiteSource, string>>

beforeAll(async () => {
  test = await startTestServer()
  things = { own: await thingsOf(test.house.own), foreign: await thingsOf(test.house.foreign) }
})
afterAll(() => test.stop())

async function thingsOf(site: HouseSite): Promise<Record<SiteSource, string>> {
  return {
    site: site.slug,
    pieceId: String(await makePiece(test.db, test.house, site)),
    cookerId: String(site.cookers[0]?.id),
    channelId: String(site.device.channelIds[0]),
    deviceId: String(site.device.id),
  }
}

/**
 * Calls an endpoint with nothing in the body and no query: whoever is let in is then told what is missing, or sees a
 * list, and nothing is changed.
 */
function call(
  agent: ReturnType<typeof supertest>,
  { method, path }: Endpoint,
  values: Record<string, string>,
) {
  const url = path.replaceAll(/:(\w+)/g, (_, name: string) => values[name] ?? '0')
  return method === 'get' ? agent.get(url) : agent[method](url).send({})
}

const name = ({ method, path }: Endpoint) => `${method.toUpperCase()} ${path}`
const siteEndpoints = allEndpoints.flatMap((endpoint) =>
  endpoint.access.kind === 'site' ? [{ endpoint, access: endpoint.access, name: name(endpoint) }] : [],
)
const houseEndpoints = allEndpoints.flatMap((endpoint) =>
  endpoint.access.kind === 'any-site' ? [{ endpoint, access: endpoint.access, name: name(endpoint) }] : [],
)
const others = allEndpoints.filter(({ access }) => access.kind !== 'site' && access.kind !== 'any-site')

describe.each(siteEndpoints)('$name', ({ endpoint, access }: { endpoint: Endpoint; access: SiteAccess }) => {
  it.each(roles)('lets in %s exactly when the matrix does', async (role) => {
    const { status } = await call(test.as(role), endpoint, things.own)
    if (may([role], access.action)) expect([200, 400, 428]).toContain(status)
    else expect(status).toBe(403)
  })

  it('shows nobody whether something of a foreign site is there', async () => {
    for (const role of roles) {
      const foreign = await call(test.as(role), endpoint, things.foreign)
      const missing = await call(test.as(role), endpoint, { site: 'no-such-site' })
      expect([foreign.status, missing.status], role).toEqual([404, 404])
      expect(foreign.body).toEqual(missing.body)
    }
    expect((await call(test.as('stranger'), endpoint, things.own)).status).toBe(404)
  })

  it('asks everyone else to sign in', async () => {
    const nobody = supertest.agent(test.url)
    expect((await call(nobody, endpoint, things.own)).status).toBe(401)
    expect((await call(nobody, endpoint, { site: 'no-such-site' })).status).toBe(401)
    const { username, secret } = test.house.own.device
    expect((await call(supertest.agent(test.url).auth(username, secret), endpoint, things.own)).status).toBe(
      401,
    )
  })
})

describe.each(houseEndpoints)('$name', ({ endpoint, access }) => {
  it.each(roles)('lets in %s exactly when the matrix does', async (role) => {
    const { status } = await call(test.as(role), endpoint, {})
    if (may([role], access.action)) expect([200, 400]).toContain(status)
    else expect(status).toBe(403)
  })

  it('lets in whoever has the role at any site, and asks everyone else to sign in', async () => {
    expect([200, 400]).toContain((await call(test.as('stranger'), endpoint, {})).status)
    expect((await call(supertest.agent(test.url), endpoint, {})).status).toBe(401)
    const { username, secret } = test.house.own.device
    expect((await call(supertest.agent(test.url).auth(username, secret), endpoint, {})).status).toBe(401)
  })
})

describe.each(others.map((endpoint) => ({ endpoint, name: name(endpoint), kind: endpoint.access.kind })))(
  '$name ($kind)',
  ({ endpoint, kind }) => {
    it('lets in whom it is for', async () => {
      const { username, secret } = test.house.own.device
      const nobody = supertest.agent(test.url)
      const device = supertest.agent(test.url).auth(username, secret)
      const wrongDevice = supertest.agent(test.url).auth(username, `${secret}!`)
      const statuses = {
        nobody: (await call(nobody, endpoint, {})).status,
        person: (await call(test.as('display'), endpoint, {})).status,
        device: (await call(device, endpoint, {})).status,
        wrongDevice: (await call(wrongDevice, endpoint, {})).status,
      }
      const letIn = { nobody: kind === 'public', person: kind !== 'device', device: kind !== 'signed-in' }
      // Refreshing is open to anyone, and then refuses for want of a cookie.
      if (endpoint.path === '/api/session/refresh') return
      for (const who of ['nobody', 'person', 'device'] as const) {
        expect(statuses[who] !== 401, `${who} got ${statuses[who]}`).toBe(letIn[who])
      }
      expect(statuses.wrongDevice !== 401).toBe(kind === 'public')
    })
  },
)

describe('the matrix', () => {
  it('lets an owner do everything, and a display look only', () => {
    for (const action of Object.values(matrix)) expect(action).toContain('owner')
    const ofDisplay = Object.entries(matrix).filter(([, allowed]) =>
      allowed.some((role) => role === 'display'),
    )
    expect(ofDisplay.map(([action]) => action)).toEqual(['site.view'])
  })

  it('is used: every endpoint at a site names one of its actions', () => {
    expect(siteEndpoints.length).toBeGreaterThan(20)
    for (const { access } of siteEndpoints) expect(Object.keys(matrix)).toContain(access.action)
  })
})

it('holds roles by site: an owner of one site is nobody special at another', async () => {
  const { prep } = test.house.people
  await test.db('site_roles').insert({ user_id: prep.id, site_id: test.house.foreign.id, role: 'owner' })
  const add = (site: string) => test.as('prep').post(`/api/sites/${site}/cookers`).send({})
  expect((await add('mill-yard')).status).toBe(400)
  expect((await add('quarry-road')).status).toBe(403)
  await test.db('site_roles').where({ user_id: prep.id, role: 'owner' }).delete()
})

it('adds up the roles that one person holds', async () => {
  const { display } = test.house.people
  const add = () => test.as('display').post('/api/sites/quarry-road/cookers').send({})
  expect((await add()).status).toBe(403)
  const further = { user_id: display.id, site_id: test.house.own.id, role: 'lead' }
  await test.db('site_roles').insert(further)
  expect((await add()).status).toBe(400)
  await test.db('site_roles').where(further).delete()
})
