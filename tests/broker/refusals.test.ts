import { createConnection } from 'node:net'
import { once } from 'node:events'
import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest'
import { generate } from 'mqtt-packet'
import type { MqttClient } from 'mqtt'
import { deviceEndpoints, type RejectedMessage } from '#shared/contract/device.ts'
import { maxPayloadBytes } from '#shared/contract/mqtt.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, mosquittoPub, publish, record, topicOf } from './devices.ts'

let server: TestServer
/** Another device, which must never notice. */
let bystander: MqttClient
let bystanderClosed = 0
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  bystander = await connectDevice(server.mqttPort, server.house.foreign.device)
  bystander.on('close', () => bystanderClosed++)
})
afterAll(async () => {
  expect(bystanderClosed).toBe(0)
  await publish(bystander, topicOf(server.house.foreign.device, 'mill-yard'), [record(1, 88)])
  await bystander.endAsync()
  await server.stop()
})
beforeEach(async () => {
  await server.db('rejected_messages').delete()
  await server.db('rejection_counts').delete()
})

async function rejected(): Promise<RejectedMessage[]> {
  const answer = await server.as('engineer').get('/api/sites/quarry-road/rejected').expect(200)
  return deviceEndpoints.rejected.response.parse(answer.body).items
}

const storedRows = async () => Number((await server.db('readings').count())[0]?.['count'])

describe('signing in', () => {
  test.each([
    ['a wrong secret', { username: 'quarry-road.north-box', secret: 'wrong' }],
    ['an unknown name', { username: 'nobody', secret: 'secret-of-quarry-road' }],
  ])('with %s is answered with “bad user name or password” (return code 4)', async (_name, credentials) => {
    await expect(connectDevice(server.mqttPort, credentials)).rejects.toMatchObject({ code: 4 })
    const { device } = server.house.own
    const { code, said } = await mosquittoPub(server.mqttPort, credentials, topicOf(device), '[]')
    expect(code).not.toBe(0)
    expect(said).toContain('bad user name or password')
  })
})

describe('a foreign topic', () => {
  test.each([
    ['another device’s', 'coalhand/mill-yard/north-box/readings'],
    ['another leaf of its own', 'coalhand/quarry-road/north-box/commands'],
    ['the broker’s own', '$SYS/anything'],
  ])('%s closes the connection and is on record', async (_name, topic) => {
    const { device } = server.house.own
    const before = await storedRows()
    const client = await connectDevice(server.mqttPort, device)
    const closed = closing(client)
    client.publish(topic, JSON.stringify([record(1, 63)]), { qos: 1 }, () => undefined)
    await closed
    const items = await eventually(rejected, (found) => found.length > 0)
    expect(items).toMatchObject([{ deviceId: device.id, reason: 'foreign-topic', topic }])
    expect(await storedRows()).toBe(before)
  })

  test('as a last will is refused at the door', async () => {
    const will = {
      topic: 'coalhand/mill-yard/north-box/status',
      payload: Buffer.from('offline'),
      qos: 1 as const,
    }
    await expect(connectDevice(server.mqttPort, server.house.own.device, { will })).rejects.toMatchObject({
      code: 5,
    })
    expect(await eventually(rejected, (found) => found.length > 0)).toMatchObject([
      { reason: 'foreign-topic' },
    ])
  })

  test('cannot be subscribed to, its own can', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    const granted = async (topic: string) => {
      const [grant] = await client.subscribeAsync(topic).catch(() => [{ qos: 128 }])
      return grant?.qos
    }
    expect(await granted('#')).toBe(128)
    expect(await granted('coalhand/+/north-box/readings')).toBe(128)
    expect(await granted('coalhand/mill-yard/north-box/status')).toBe(128)
    expect(await granted('coalhand/quarry-road/north-box/#')).toBe(0)
    await client.endAsync()
  })
})

describe('what cannot be stored is acknowledged, kept with its reason, and harms nothing else', () => {
  const now = systemClock.now()
  test.each([
    ['broken JSON', '[{"n":"1","u":"Cel","v":63.', 'not-json', 'JSON'],
    ['no SenML', '{"temperature":63}', 'not-senml', 'a pack is a list of records'],
    ['an empty pack', '[]', 'not-senml', '1 to 3000 records'],
    ['a name with a blank', [{ n: 'pit one', u: 'Cel', v: 1 }], 'not-senml', 'pit one'],
    ['an unknown channel', [record(77, 63)], 'unknown-channel', '77'],
    ['an unknown unit', [{ n: '1', u: 'degF', v: 63 }], 'unknown-unit', 'degF'],
    ['no unit', [{ n: '1', v: 63 }], 'unknown-unit', 'no unit'],
    ['the wrong unit', [{ n: '1', u: 'Ohm', v: 63 }], 'wrong-unit', 'Cel, not Ohm'],
    ['a text', [{ n: '1', u: 'Cel', vs: 'hot' }], 'not-a-number', 'text'],
    ['a text where a number belongs', [{ n: '1', u: 'Cel', v: 'hot' }], 'not-a-number', 'number'],
    ['9999', [record(1, 9999)], 'value-out-of-range', '9999'],
    ['−60 °C', [record(1, -60)], 'value-out-of-range', '-60'],
    ['the year 2099', [record(1, 63, Date.parse('2099-06-01'))], 'time-in-future', '2099-06-01'],
    ['three minutes ahead', [record(1, 63, now + 180_000)], 'time-in-future', 'two minutes'],
    ['15 days ago', [record(1, 63, now - 15 * 86_400_000)], 'time-too-old', '14 days'],
    ['a field that must be understood', [{ ...record(1, 63), secret_: 1 }], 'unsupported-field', 'secret_'],
    ['a later SenML', [{ ...record(1, 63), bver: 11 }], 'unsupported-field', 'bver'],
    ['a battery of 140 %', [{ n: 'battery', u: '%EL', v: 140 }], 'value-out-of-range', '140'],
  ])('%s', async (_name, pack, reason, words) => {
    const { device } = server.house.own
    const before = await storedRows()
    const client = await connectDevice(server.mqttPort, device)
    await publish(client, topicOf(device), pack)
    // The acknowledgement is enough: nothing has to be waited for.
    const items = await rejected()
    expect(items).toMatchObject([{ deviceId: device.id, reason, topic: topicOf(device) }])
    expect(items[0]?.detail).toContain(words)
    expect(items[0]?.payload.length).toBeGreaterThan(0)
    await publish(client, topicOf(device), [record(1, 64)])
    expect(await storedRows()).toBe(before + 1)
    await client.endAsync()
  })

  test('good records of the same pack are kept', async () => {
    const { device } = server.house.own
    const before = await storedRows()
    const client = await connectDevice(server.mqttPort, device)
    await publish(client, topicOf(device), [
      record(1, 61),
      record(2, 9999),
      record(99, 3),
      { n: '3', u: 'Cel', v: '?' },
    ])
    expect((await rejected()).map(({ reason }) => reason).sort()).toEqual([
      'not-a-number',
      'unknown-channel',
      'value-out-of-range',
    ])
    expect(await storedRows()).toBe(before + 1)
    await client.endAsync()
  })

  test('bytes that are no text, and a NUL', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    await client.publishAsync(topicOf(device), Buffer.from([0, 1, 2, 255, 254, 0]), { qos: 1 })
    expect(await rejected()).toMatchObject([{ reason: 'not-json' }])
    await client.endAsync()
  })

  test('beyond 200 a day they are counted and no longer kept', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    await Promise.all(Array.from({ length: 230 }, () => publish(client, topicOf(device), 'nonsense')))
    const kept = await server.db('rejected_messages').count()
    const counted: unknown = await server
      .db('rejection_counts')
      .where({ device_id: device.id })
      .sum('count as sum')
    expect(kept).toMatchObject([{ count: 200 }])
    expect(counted).toMatchObject([{ sum: '230' }])
    await client.endAsync()
  })
})

describe('a packet above 64 kB', () => {
  test('of 5 MB closes the connection at its header, is on record, and is never held in memory', async () => {
    const { device } = server.house.own
    const client = await connectDevice(server.mqttPort, device)
    const closed = closing(client)
    client.publish(topicOf(device), Buffer.alloc(5_000_000, 'x'), { qos: 1 }, () => undefined)
    await closed
    const items = await eventually(rejected, (found) => found.length > 0)
    expect(items).toMatchObject([{ deviceId: device.id, reason: 'too-large', topic: topicOf(device) }])
    expect(items[0]?.detail).toMatch(/packet of 50000\d\d bytes; at most 65536/)
  })

  test('is refused from its fixed header alone', async () => {
    const socket = createConnection(server.mqttPort, '127.0.0.1')
    socket.on('error', () => undefined)
    const { username, secret } = server.house.own.device
    socket.write(
      generate({
        cmd: 'connect',
        protocolId: 'MQTT',
        protocolVersion: 4,
        clean: true,
        clientId: 'header-only',
        keepalive: 0,
        username,
        password: Buffer.from(secret),
      }),
    )
    const answer: unknown = (await once(socket, 'data'))[0]
    expect(answer).toEqual(Buffer.from([0x20, 2, 0, 0]))
    const closed = once(socket, 'close')
    // PUBLISH, QoS 1, remaining length 5 000 000: five bytes, and not one of its body.
    socket.write(Buffer.from([0x32, 0xc0, 0x96, 0xb1, 0x02]))
    await closed
    expect(await eventually(rejected, (found) => found.length > 0)).toMatchObject([{ reason: 'too-large' }])
  })

  test('64 kB itself is taken', async () => {
    const { device } = server.house.own
    const topic = topicOf(device)
    const client = await connectDevice(server.mqttPort, device)
    const pack = JSON.stringify([record(1, 65)])
    // Fixed header 4 bytes, topic length 2, packet id 2.
    const payload = pack.padEnd(maxPayloadBytes - 8 - topic.length, ' ')
    await publish(client, topic, payload)
    await client.endAsync()
    expect(await rejected()).toEqual([])
  })

  test('before signing in is refused as well', async () => {
    const socket = createConnection(server.mqttPort, '127.0.0.1')
    socket.on('error', () => undefined)
    const closed = once(socket, 'close')
    socket.write(Buffer.from([0x10, 0xc0, 0x96, 0xb1, 0x02]))
    await closed
  })
})
