import { createConnection } from 'node:net'
import { once } from 'node:events'
import { afterEach, beforeEach, expect, inject, test } from 'vitest'
import { z } from 'zod'
import type { MqttClient } from 'mqtt'
import { systemClock } from '#shared/domain/clock.ts'
import { cuttableProxy, type CuttableProxy } from '../harness/cuttable-proxy.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { connectDevice, eventually, publish, record, topicOf } from './devices.ts'

let proxy: CuttableProxy
let server: TestServer
beforeEach(async () => {
  const { hostname, port } = new URL(inject('postgresUrl'))
  proxy = await cuttableProxy(hostname, Number(port))
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } }, { databasePort: proxy.port })
})
afterEach(async () => {
  await server.stop()
  await proxy.cut()
})

const Health = z.object({ ingest: z.object({ waiting: z.number() }) })
const waiting = async () => Health.parse((await server.api.get('/api/health')).body).ingest.waiting
const rowsOf = async (channelId: number) =>
  Number((await server.db('readings').where({ channel_id: channelId }).count())[0]?.['count'])

test('while the database is away nothing is acknowledged and nothing lost; afterwards everything is there', async () => {
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device, { keepalive: 1 })
  let closed = 0
  client.on('close', () => closed++)
  await publish(client, topicOf(device), [record(1, 60)])

  await proxy.cut()
  const from = systemClock.now() - 3_000_000
  let acknowledged = 0
  const sent = Array.from({ length: 2000 }, async (_, index) => {
    await publish(client, topicOf(device), [record(2, 60 + index / 100, from + index * 1000)])
    acknowledged++
  })
  await eventually(waiting, (count) => count > 50)
  // Three keep-alive times: pings are answered although publishing has to wait.
  await new Promise((resolve) => setTimeout(resolve, 3_500))
  expect(acknowledged).toBe(0)
  expect(closed).toBe(0)

  await proxy.mend()
  await Promise.all(sent)
  expect(await rowsOf(device.channelIds[1] ?? 0)).toBe(2000)
  expect(closed).toBe(0)
  await client.endAsync()
})

test('devices sign in while the database is away', async () => {
  await proxy.cut()
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device)
  const stored = publish(client, topicOf(device), [record(3, 77)])
  await proxy.mend()
  await stored
  expect(await rowsOf(device.channelIds[2] ?? 0)).toBe(1)
  await client.endAsync()
})

test('a device without MQTT is told to send again', async () => {
  await proxy.cut()
  const { username, secret } = server.house.own.device
  const answer = await server.api
    .post('/api/readings')
    .auth(username, secret)
    .send([record(4, 70)])
  expect(answer.status).toBe(503)
  await proxy.mend()
}, 30_000)

test('a connection cut in the middle of a commit changes nothing in the end', async () => {
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device)
  const from = systemClock.now() - 3_000_000
  const sent = Array.from({ length: 3000 }, (_, index) =>
    publish(client, topicOf(device), [record(5, 50 + index / 100, from + index * 500)]),
  )
  for (let cut = 0; cut < 8; cut++) {
    await new Promise((resolve) => setTimeout(resolve, 30))
    await proxy.cut()
    await proxy.mend()
  }
  await Promise.all(sent)
  expect(await rowsOf(device.channelIds[4] ?? 0)).toBe(3000)
  const counted = await server
    .db('readings_1m')
    .where({ channel_id: device.channelIds[4] })
    .sum('count as sum')
  expect(counted).toMatchObject([{ sum: 3000 }])
  await client.endAsync()
})

test('a flood at QoS 0 into a database that is away is held back in the sockets', async () => {
  const { device } = server.house.own
  await proxy.cut()
  const flood = await connectDevice(server.mqttPort, device)
  const stream = createConnection(server.mqttPort, '127.0.0.1')
  stream.destroy()
  await once(stream, 'close')
  for (let index = 0; index < 20_000; index++) {
    flood.publish(topicOf(device), JSON.stringify([record(6, 20, 1_000_000 + index)]), { qos: 0 })
  }
  const one = record(6, 21, systemClock.now() - 1000)
  const other: MqttClient = await connectDevice(server.mqttPort, server.house.foreign.device)
  const stored = publish(other, topicOf(server.house.foreign.device, 'mill-yard'), [one])
  await new Promise((resolve) => setTimeout(resolve, 500))
  expect(await waiting()).toBeLessThan(2_000)
  await proxy.mend()
  await stored
  await flood.endAsync()
  await other.endAsync()
})
