import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { readingEndpoints } from '#shared/contract/reading.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { connectDevice, eventually, mosquittoPub, publish, record, topicOf } from './devices.ts'
import { watchSite } from '../live/watch-site.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
})
afterAll(() => server.stop())

async function readingsOf(channelId: number) {
  const answer = await server.as('manager').get(`/api/channels/${channelId}/readings?limit=10`).expect(200)
  return readingEndpoints.ofChannel.response.parse(answer.body).items
}

describe('a pack published with QoS 1', () => {
  test('is in the API and on the WebSocket within 400 ms', async () => {
    const { device } = server.house.own
    const [first = 0, second = 0] = device.channelIds
    const watcher = await watchSite(server)
    const client = await connectDevice(server.mqttPort, device)
    const atMs = systemClock.now() - 1000
    const begin = performance.now()
    await publish(client, topicOf(device), [record(1, 63.2, atMs), record(2, 121.5, atMs)])
    // The acknowledgement came after the commit: the rows are there now, not soon.
    expect(await readingsOf(first)).toMatchObject([
      { at: new Date(atMs).toISOString(), value: 63.2, celsius: 63.2 },
    ])
    expect(await readingsOf(second)).toMatchObject([{ value: 121.5 }])
    const frame = await watcher.until(
      (message) => message.type === 'delta' && message.changes.readings !== undefined,
      400,
    )
    expect(performance.now() - begin).toBeLessThan(400)
    expect(frame).toMatchObject({
      site: 'quarry-road',
      changes: {
        readings: [
          [first, atMs, 63.2],
          [second, atMs, 121.5],
        ],
      },
    })
    watcher.close()
    await client.endAsync()
  })

  test('by Debian’s mosquitto_pub is stored the same', async () => {
    const { device } = server.house.own
    const atMs = systemClock.now()
    const pack = JSON.stringify([{ bt: atMs / 1000, bu: 'Cel', n: '3', v: 74.25 }])
    expect(await mosquittoPub(server.mqttPort, device, topicOf(device), pack)).toEqual({ code: 0, said: '' })
    expect(await readingsOf(device.channelIds[2] ?? 0)).toMatchObject([
      { at: new Date(atMs).toISOString(), value: 74.25 },
    ])
  })

  test('of a reading without a time gets the time of receipt', async () => {
    const { device } = server.house.own
    const before = systemClock.now()
    const client = await connectDevice(server.mqttPort, device)
    await publish(client, topicOf(device), [record(4, 50)])
    const [reading] = await readingsOf(device.channelIds[3] ?? 0)
    expect(Date.parse(reading?.at ?? '')).toBeGreaterThanOrEqual(before)
    expect(Date.parse(reading?.at ?? '')).toBeLessThanOrEqual(systemClock.now())
    await client.endAsync()
  })
})

test.each([0, 2] as const)('QoS %d is stored too', async (qos) => {
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device)
  await publish(client, topicOf(device), [record(5, 40 + qos)], qos)
  await client.endAsync()
  const channelId = device.channelIds[4] ?? 0
  await eventually(
    () => readingsOf(channelId),
    (items) => items[0]?.value === 40 + qos,
  )
})

test('many messages in one breath at QoS 0, then the line is cut: all of them arrive', async () => {
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device)
  const from = systemClock.now() - 600_000
  for (let index = 0; index < 500; index++) {
    client.publish(topicOf(device), JSON.stringify([record(6, 20 + index / 10, from + index * 1000)]), {
      qos: 0,
    })
  }
  await client.endAsync()
  const channelId = device.channelIds[5] ?? 0
  const count = async () =>
    Number((await server.db('readings').where({ channel_id: channelId }).count())[0]?.['count'])
  expect(await eventually(count, (rows) => rows >= 500)).toBe(500)
})

test('a device tells that it came and went, its battery and its signal', async () => {
  const { device } = server.house.own
  const watcher = await watchSite(server)
  const client = await connectDevice(server.mqttPort, device)
  await publish(client, topicOf(device), [
    { n: 'battery', u: '%EL', v: 81 },
    { n: 'signal', u: 'dBm', v: -61 },
  ])
  const told = (connection: string) =>
    watcher.until(
      (message) =>
        message.type === 'delta' &&
        message.changes.devices?.some(
          (each) => each.id === device.id && each.connection === connection && each.batteryPercent === 81,
        ) === true,
    )
  await told('online')
  await client.endAsync()
  await told('offline')
  const answer = await server.as('manager').get('/api/sites/quarry-road/devices').expect(200)
  expect(answer.body).toMatchObject({
    items: [{ id: device.id, connection: 'offline', batteryPercent: 81, signalDbm: -61 }],
  })
  watcher.close()
})
