import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { z } from 'zod'
import { deviceEndpoints, DeviceStatus, NewDevice, NewDeviceSecret } from '#shared/contract/device.ts'
import { mqttPath } from '#shared/contract/mqtt.ts'
import { systemClock, type Clock } from '#shared/domain/clock.ts'
import { connectAsync } from 'mqtt'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, publish, record } from './devices.ts'

let aheadMs = 0
const clock: Clock = { now: () => systemClock.now() + aheadMs }
const hourMs = 3_600_000

let server: TestServer
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 }, clock })
})
afterAll(() => server.stop())

/** A device that no other test uses. */
async function newDevice(name: string) {
  const answer = await server
    .as('engineer')
    .post('/api/sites/quarry-road/devices')
    .send({ name, channels: 1 })
    .expect(201)
  const made = NewDevice.parse(answer.body)
  const path = `/api/devices/${made.deviceId}`
  return {
    ...made,
    path,
    renew: async (overlapHours: number) => {
      const renewed = await server.as('engineer').post(`${path}/secrets`).send({ overlapHours }).expect(201)
      return NewDeviceSecret.parse(renewed.body)
    },
    secrets: async () => {
      const listed = await server.as('engineer').get(`${path}/secrets`).expect(200)
      return deviceEndpoints.secrets.response.parse(listed.body).items
    },
    status: async () =>
      DeviceStatus.parse((await server.as('engineer').get(`${path}/status`).expect(200)).body),
  }
}

const connect = (device: { username: string }, secret: string, clientId = 'box') =>
  connectDevice(server.mqttPort, { username: device.username, secret }, { clientId })
const isRefused = (device: { username: string }, secret: string) =>
  expect(connect(device, secret)).rejects.toMatchObject({ code: 4 })
const sendByHttp = (device: { username: string }, secret: string) =>
  server.api
    .post('/api/readings')
    .auth(device.username, secret)
    .send([{ n: '1', u: 'Cel', v: 70 }])

describe('a new secret', () => {
  test('lets the device in at once; the old one too until the overlap is over', async () => {
    const device = await newDevice('Overlap')
    const { secret, oldSecretEndsAt, username } = await device.renew(2)
    expect(username).toBe(device.username)
    expect(Buffer.from(secret, 'base64url')).toHaveLength(32)
    expect(Date.parse(oldSecretEndsAt ?? '') - clock.now()).toBeGreaterThan(2 * hourMs - 60_000)
    const withOld = await connect(device, device.secret, 'old')
    const withNew = await connect(device, secret, 'new')
    await sendByHttp(device, device.secret).expect(200)

    const closed = closing(withOld)
    aheadMs += 2 * hourMs + 1000
    await isRefused(device, device.secret)
    await sendByHttp(device, device.secret).expect(401)
    // Whoever is connected by it still is let go within seconds.
    await closed
    await publish(withNew, device.topic, [record(1, 61)])
    await withNew.endAsync()
    expect(await device.secrets()).toHaveLength(1)
  })

  test('without an overlap ends the old one at once, and its connection', async () => {
    const device = await newDevice('At once')
    const old = await connect(device, device.secret)
    const closed = closing(old)
    const { secret, oldSecretEndsAt } = await device.renew(0)
    await closed
    expect(Date.parse(oldSecretEndsAt ?? '')).toBeLessThanOrEqual(clock.now())
    await isRefused(device, device.secret)
    await (await connect(device, secret)).endAsync()
    expect((await device.secrets()).map(({ expiresAt }) => expiresAt)).toEqual([null])
  })

  test('shows when it was used first, and which of them is in use', async () => {
    const device = await newDevice('In use')
    const box = await connect(device, device.secret)
    const { secret, secretId } = await device.renew(24)
    const [fresh, old] = await device.secrets()
    expect(fresh).toMatchObject({ id: secretId, firstUsedAt: null, lastUsedAt: null, inUse: false })
    expect(old).toMatchObject({ inUse: true })
    expect(old?.expiresAt).not.toBeNull()
    expect(JSON.stringify(await device.secrets())).not.toContain(secret)

    await box.endAsync()
    await (await connect(device, secret)).endAsync()
    await eventually(device.secrets, ([one, two]) => one?.inUse === false && two?.inUse === false)
    const [used] = await device.secrets()
    expect(used?.firstUsedAt).not.toBeNull()
    const written = () => server.db('device_secrets').where({ id: secretId }).first('first_used_at')
    const WrittenUse = z.object({ first_used_at: z.date().nullable() })
    const row = await eventually(
      async () => WrittenUse.parse(await written()),
      ({ first_used_at }) => first_used_at !== null,
    )
    expect(row.first_used_at?.toISOString()).toBe(used?.firstUsedAt)
  })

  test('does not lengthen the life of those before it, and no more than five are good at a time', async () => {
    const device = await newDevice('Many')
    await device.renew(1)
    const { oldSecretEndsAt } = await device.renew(48)
    const ends = (await device.secrets()).map(({ expiresAt }) => expiresAt)
    expect(ends.slice(0, 2)).toEqual([null, oldSecretEndsAt])
    expect(Date.parse(ends[2] ?? '') - clock.now()).toBeLessThan(hourMs + 60_000)
    await device.renew(24)
    await device.renew(24)
    const post = (overlapHours: number) =>
      server.as('engineer').post(`${device.path}/secrets`).send({ overlapHours })
    await post(24).expect(409)
    await post(0).expect(201)
    expect(await device.secrets()).toHaveLength(1)
  })

  test.each([-1, 24 * 30 + 1, 'a day', null])(
    'with an overlap of %j hours is refused',
    async (overlapHours) => {
      const { id } = server.house.own.device
      await server.as('engineer').post(`/api/devices/${id}/secrets`).send({ overlapHours }).expect(400)
    },
  )

  test('is in the trail, without the secret', async () => {
    const device = await newDevice('Trail')
    const { secret, secretId } = await device.renew(24)
    const [, old] = await device.secrets()
    await server
      .as('engineer')
      .delete(`${device.path}/secrets/${old?.id ?? 0}`)
      .expect(204)
    const trail: unknown = await server
      .db('audit_entries')
      .where({ subject: `device ${device.deviceId}` })
      .orderBy('id')
    const by = { user_id: server.house.people.engineer.id }
    expect(trail).toMatchObject([
      { action: 'device.add', ...by },
      { action: 'device.secret.renew', ...by, data: { secretId, overlapHours: 24 } },
      { action: 'device.secret.end', ...by, data: { secretId: old?.id } },
    ])
    expect(JSON.stringify(trail)).not.toContain(secret)
  })
})

describe('ending an old secret', () => {
  test('closes the connections that were made with it, over TCP and WebSocket, and no other', async () => {
    const device = await newDevice('Ended')
    const byTcp = await connect(device, device.secret, 'tcp')
    const byWebSocket = await connectAsync(server.url.replace('http', 'ws') + mqttPath, {
      username: device.username,
      password: device.secret,
      clientId: 'ws',
      reconnectPeriod: 0,
    })
    const { secret } = await device.renew(24)
    const withNew = await connect(device, secret, 'new')
    const closed = Promise.all([closing(byTcp), closing(byWebSocket)])
    const [, old] = await device.secrets()
    await server
      .as('engineer')
      .delete(`${device.path}/secrets/${old?.id ?? 0}`)
      .expect(204)
    await closed
    await isRefused(device, device.secret)
    await publish(withNew, device.topic, [record(1, 62)])
    expect(await device.status()).toMatchObject({
      connection: 'online',
      lastError: { kind: 'ended-secret', remoteAddress: '127.0.0.1' },
    })
    await withNew.endAsync()
  })

  test('cannot be done to the newest, to one that has ended, or to another device’s', async () => {
    const device = await newDevice('Kept')
    const other = await newDevice('Other')
    const [newest] = await device.secrets()
    const end = (path: string, id = 0) => server.as('engineer').delete(`${path}/secrets/${id}`)
    await end(device.path, newest?.id).expect(409)
    await other.renew(24)
    const [, old] = await other.secrets()
    await end(device.path, old?.id).expect(404)
    await end(other.path, old?.id).expect(204)
    await end(other.path, old?.id).expect(404)
  })
})
