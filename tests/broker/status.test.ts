import { pino } from 'pino'
import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { deviceEndpoints, DeviceStatus, NewDevice } from '#shared/contract/device.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../server/compose.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, publish, record } from './devices.ts'
import { connectPacket } from './protocol/packets.ts'
import { openWire } from './protocol/wire.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
})
afterAll(() => server.stop())

async function newDevice(name: string) {
  const answer = await server
    .as('engineer')
    .post('/api/sites/quarry-road/devices')
    .send({ name, channels: 2 })
    .expect(201)
  const device = NewDevice.parse(answer.body)
  const status = async (role: 'engineer' | 'manager' = 'engineer') =>
    DeviceStatus.parse((await server.as(role).get(`/api/devices/${device.deviceId}/status`).expect(200)).body)
  const becomes = (connection: 'online' | 'offline') =>
    eventually(status, (seen) => seen.connection === connection)
  return { ...device, status, becomes }
}

const never = {
  connection: 'never',
  transport: null,
  since: null,
  until: null,
  messages: 0,
  readings: 0,
  rejected: 0,
  lastError: null,
}

describe('the status of a device', () => {
  test('says how it is connected, since when, and what came since', async () => {
    const device = await newDevice('Steady')
    expect(await device.status()).toMatchObject(never)
    const box = await connectDevice(server.mqttPort, device, { clientId: 'steady-1' })
    await publish(box, device.topic, [record(1, 60), record(2, 61)])
    await publish(box, device.topic, [record(1, 62), record(9, 63)])
    const online = await device.status()
    expect(online).toMatchObject({
      connection: 'online',
      transport: 'mqtt',
      until: null,
      clientId: 'steady-1',
      remoteAddress: '127.0.0.1',
      messages: 2,
      readings: 3,
      rejected: 1,
      lastError: { kind: 'refused-message', reason: 'unknown-channel' },
    })
    expect(online.lastError?.detail).toContain('no channel “9”')
    await box.endAsync()
    const offline = await device.becomes('offline')
    expect(offline).toMatchObject({ since: online.since, messages: 2, readings: 3 })
    expect(offline.until).not.toBeNull()
  })

  test('tells where from to those only who manage devices', async () => {
    const device = await newDevice('Private')
    const box = await connectDevice(server.mqttPort, device)
    await expect(connectDevice(server.mqttPort, { ...device, secret: 'wrong' })).rejects.toThrow()
    expect(await device.status('manager')).toMatchObject({
      connection: 'online',
      remoteAddress: null,
      lastError: { kind: 'wrong-secret', remoteAddress: null },
    })
    expect(await device.status()).toMatchObject({
      remoteAddress: '127.0.0.1',
      lastError: { remoteAddress: '127.0.0.1' },
    })
    await box.endAsync()
    await server.as('crew').get(`/api/devices/${device.deviceId}/status`).expect(403)
  })

  test('of a site comes in one list', async () => {
    const device = await newDevice('Listed')
    const answer = await server.as('manager').get('/api/sites/quarry-road/device-status').expect(200)
    const { items } = deviceEndpoints.statuses.response.parse(answer.body)
    expect(items.find(({ deviceId }) => deviceId === device.deviceId)).toMatchObject(never)
    expect(items.map(({ deviceId }) => deviceId)).not.toContain(server.house.foreign.device.id)
  })

  test('counts anew with each connection, and stays online through a takeover', async () => {
    const device = await newDevice('Taken over')
    const will = {
      topic: device.topic.replace('readings', 'status'),
      payload: Buffer.from('offline'),
      qos: 1 as const,
      retain: true,
    }
    const first = await connectDevice(server.mqttPort, device, { clientId: 'same', will })
    await publish(first, device.topic, [record(1, 60)])
    const closed = closing(first)
    const second = await connectDevice(server.mqttPort, device, { clientId: 'same', will })
    await closed
    expect(await device.status()).toMatchObject({
      connection: 'online',
      until: null,
      messages: 0,
      lastError: { kind: 'taken-over' },
    })
    const written = async () =>
      (await server.as('crew').get('/api/sites/quarry-road/devices')).body as unknown
    await eventually(written, (body) =>
      deviceEndpoints.list.response
        .parse(body)
        .items.some(({ id, connection }) => id === device.deviceId && connection === 'online'),
    )
    await second.endAsync()
  })

  test('is online as long as one of several connections is there, and counts what came on all', async () => {
    const device = await newDevice('Twice')
    const first = await connectDevice(server.mqttPort, device, { clientId: 'a' })
    const second = await connectDevice(server.mqttPort, device, { clientId: 'b' })
    await publish(first, device.topic, [record(1, 60)])
    await publish(second, device.topic, [record(1, 61)])
    expect(await device.status()).toMatchObject({ clientId: 'b', messages: 2 })
    await second.endAsync()
    await eventually(device.status, ({ clientId }) => clientId === 'a')
    expect(await device.status()).toMatchObject({ connection: 'online', messages: 2, lastError: null })
    await first.endAsync()
    await device.becomes('offline')
  })

  test('over HTTP has no connection, but a count', async () => {
    const device = await newDevice('By hand')
    for (const v of [70, 71, 9999]) {
      await server.api
        .post('/api/readings')
        .auth(device.username, device.secret)
        .send([{ n: '1', u: 'Cel', v }])
        .expect(200)
    }
    await server.api.post('/api/readings').auth(device.username, 'wrong').send([]).expect(401)
    expect(await device.status()).toMatchObject({
      connection: 'never',
      transport: 'http',
      messages: 3,
      readings: 2,
      rejected: 1,
      remoteAddress: '127.0.0.1',
      lastError: { kind: 'wrong-secret', detail: expect.stringContaining('http') as unknown },
    })
  })
})

describe('what went wrong last', () => {
  test.each([
    ['lost', 'broke off'],
    ['foreign-topic', 'only'],
    ['too-large', 'at most 65536'],
    ['malformed', ''],
  ] as const)('%s', async (kind, words) => {
    const device = await newDevice(`Fault ${kind}`)
    const box = await connectDevice(server.mqttPort, device)
    const closed = closing(box)
    const topic = kind === 'foreign-topic' ? 'coalhand/elsewhere/box/readings' : device.topic
    if (kind === 'lost') box.stream.destroy()
    else if (kind === 'malformed') box.stream.write(Buffer.from([0xf0, 0]))
    else {
      const payload = kind === 'too-large' ? 'x'.repeat(100_000) : '[]'
      box.publish(topic, payload, { qos: 1 }, () => undefined)
    }
    await closed
    const { lastError } = await eventually(device.status, (seen) => seen.lastError !== null)
    expect(lastError?.kind).toBe(kind)
    expect(lastError?.detail).toContain(words)
  })

  test('silence beyond its keep-alive', async () => {
    const device = await newDevice('Silent')
    const wire = openWire(server.mqttPort)
    const password = Buffer.from(device.secret)
    wire.send(connectPacket({ username: device.username, password, keepalive: 1 }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 0 }])
    const { lastError } = await device.status()
    expect(lastError).toMatchObject({ kind: 'silent', detail: 'nothing was heard for 1.5 s' })
  })

  test('a name that no device has is nobody’s fault', async () => {
    const device = await newDevice('Blameless')
    await expect(
      connectDevice(server.mqttPort, { username: 'quarry-road.nobody', secret: 'wrong' }),
    ).rejects.toThrow()
    expect((await device.status()).lastError).toBeNull()
  })
})

test('it outlives the server: who was connected is offline since it was last heard', async () => {
  const first = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  const { device } = first.house.own
  const statusFrom = async ({ as }: Pick<TestServer, 'as'>) =>
    DeviceStatus.parse((await as('engineer').get(`/api/devices/${device.id}/status`).expect(200)).body)
  await expect(connectDevice(first.mqttPort, { ...device, secret: 'wrong' })).rejects.toThrow()
  const box = await connectDevice(first.mqttPort, device, { clientId: 'box' })
  await publish(box, 'coalhand/quarry-road/north-box/readings', [record(1, 60)])
  const before = await statusFrom(first)
  expect(before).toMatchObject({ connection: 'online', messages: 1 })
  await first.server.stop()

  const again = composeServer({
    log: pino({ level: 'silent' }),
    tokenKey: 'a key for tests only, of no use elsewhere',
    build: 'test',
    http: { host: '127.0.0.1', port: 0 },
    databaseUrl: first.databaseUrl,
    clock: systemClock,
  })
  await again.start()
  const [status] = await again.services.devices.statuses(first.house.own.id, { withAddresses: true })
  expect(status).toMatchObject({
    connection: 'offline',
    transport: 'mqtt',
    clientId: 'box',
    since: before.since,
    messages: 1,
    readings: 1,
    lastError: { kind: 'wrong-secret' },
  })
  expect(Date.parse(status?.until ?? '')).toBeGreaterThanOrEqual(Date.parse(before.since ?? ''))
  await again.stop()
  await box.endAsync(true)
  await first.stop()
})
