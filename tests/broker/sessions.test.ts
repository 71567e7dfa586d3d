import { createConnection } from 'node:net'
import { once } from 'node:events'
import { generate } from 'mqtt-packet'
import { afterAll, beforeAll, expect, test } from 'vitest'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, publish, record, topicOf } from './devices.ts'

let server: TestServer
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
})
afterAll(() => server.stop())

const statusOf = (device: { slug: string }) => topicOf(device).replace('readings', 'status')

test('a second connection with the same client id takes over [MQTT-3.1.4-2]', async () => {
  const { device } = server.house.own
  const first = await connectDevice(server.mqttPort, device, { clientId: 'box' })
  const firstClosed = closing(first)
  const second = await connectDevice(server.mqttPort, device, { clientId: 'box' })
  await firstClosed
  await publish(second, topicOf(device), [record(1, 60)])
  await second.endAsync()
})

test('two devices may use the same client id', async () => {
  const { own, foreign } = server.house
  const first = await connectDevice(server.mqttPort, own.device, { clientId: 'box' })
  const second = await connectDevice(server.mqttPort, foreign.device, { clientId: 'box' })
  await publish(first, topicOf(own.device), [record(1, 61)])
  await publish(second, topicOf(foreign.device, 'mill-yard'), [record(1, 62)])
  await first.endAsync()
  await second.endAsync()
})

test('status is retained, and the last will changes it', async () => {
  const { device } = server.house.own
  const topic = statusOf(device)
  const will = { topic, payload: Buffer.from('offline'), qos: 1 as const, retain: true }
  const box = await connectDevice(server.mqttPort, device, { clientId: 'box', will })
  await box.publishAsync(topic, 'online', { qos: 1, retain: true })

  const statusSeenBy = async () => {
    const reader = await connectDevice(server.mqttPort, device, { clientId: 'reader' })
    const heard = new Promise<string>((resolve) =>
      reader.on('message', (_topic, payload) => resolve(payload.toString())),
    )
    await reader.subscribeAsync(topic, { qos: 1 })
    const status = await heard
    await reader.endAsync()
    return status
  }
  expect(await statusSeenBy()).toBe('online')
  box.stream.destroy()
  await eventually(statusSeenBy, (status) => status === 'offline')
})

test('silence beyond one and a half keep-alive times ends the connection [MQTT-3.1.2-24]', async () => {
  const socket = await rawConnect(1)
  const begin = performance.now()
  await once(socket, 'close')
  expect(performance.now() - begin).toBeGreaterThan(1_400)
  expect(performance.now() - begin).toBeLessThan(3_000)
})

test('pings keep it open, and each is answered [MQTT-3.12.4-1]', async () => {
  const socket = await rawConnect(1)
  let answers = 0
  socket.on('data', (chunk: Buffer) => (answers += chunk.length / 2))
  for (let ping = 1; ping <= 6; ping++) {
    socket.write(Buffer.from([0xc0, 0]))
    await eventually(
      () => answers,
      (count) => count === ping,
    )
    await new Promise((resolve) => setTimeout(resolve, 400))
  }
  expect(socket.destroyed).toBe(false)
  socket.destroy()
})

test('a ping cut in two is answered all the same', async () => {
  const socket = await rawConnect(0)
  socket.setNoDelay(true)
  const answer = once(socket, 'data')
  socket.write(Buffer.from([0xc0]))
  await new Promise((resolve) => setTimeout(resolve, 50))
  socket.write(Buffer.from([0]))
  expect(await answer).toEqual([Buffer.from([0xd0, 0])])
  socket.destroy()
})

test('what follows CONNECT in the same breath is taken too', async () => {
  const { device } = server.house.own
  const socket = createConnection(server.mqttPort, '127.0.0.1')
  const publishes = Array.from({ length: 100 }, (_, index) =>
    generate({
      cmd: 'publish',
      topic: topicOf(device),
      payload: JSON.stringify([record(2, 20 + index / 10)]),
      qos: 1,
      messageId: index + 1,
      dup: false,
      retain: false,
    }),
  )
  let received = Buffer.alloc(0)
  socket.on('data', (chunk: Buffer) => (received = Buffer.concat([received, chunk])))
  socket.write(Buffer.concat([connectPacket(0), ...publishes]))
  // CONNACK and a PUBACK of four bytes each.
  await eventually(
    () => received.length,
    (length) => length === 4 + 400,
  )
  socket.destroy()
})

async function rawConnect(keepalive: number) {
  const socket = createConnection(server.mqttPort, '127.0.0.1')
  socket.write(connectPacket(keepalive))
  const answer: unknown = (await once(socket, 'data'))[0]
  expect(answer).toEqual(Buffer.from([0x20, 2, 0, 0]))
  return socket
}

function connectPacket(keepalive: number): Buffer {
  const { username, secret } = server.house.own.device
  return generate({
    cmd: 'connect',
    protocolId: 'MQTT',
    protocolVersion: 4,
    clean: true,
    clientId: 'raw',
    keepalive,
    username,
    password: Buffer.from(secret),
  })
}
