import { afterAll, beforeAll, expect, it } from 'vitest'
import { startTestServer, type TestServer } from '../harness/server.ts'

let test: TestServer
beforeAll(async () => {
  test = await startTestServer()
})
afterAll(() => test.stop())

it('lists the sites where one has a role, with all of one’s roles there', async () => {
  const { prep } = test.house.people
  await test.db('site_roles').insert([
    { user_id: prep.id, site_id: test.house.foreign.id, role: 'crew' },
    { user_id: prep.id, site_id: test.house.foreign.id, role: 'manager' },
  ])
  const response = await test.as('prep').get('/api/sites').expect(200)
  expect(response.body).toEqual({
    items: [
      {
        id: test.house.own.id,
        slug: 'quarry-road',
        name: 'Quarry Road',
        timeZone: 'America/Chicago',
        elevationM: 210,
        roles: ['prep'],
      },
      {
        id: test.house.foreign.id,
        slug: 'mill-yard',
        name: 'Mill Yard',
        timeZone: 'America/Denver',
        elevationM: 210,
        roles: expect.arrayContaining(['crew', 'manager']) as unknown,
      },
    ],
  })
})

it('lists none for somebody without a role anywhere', async () => {
  await test.db('site_roles').where({ user_id: test.house.people.crew.id }).delete()
  const response = await test.as('crew').get('/api/sites').expect(200)
  expect(response.body).toEqual({ items: [] })
})
