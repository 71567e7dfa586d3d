import { once } from 'node:events'
import { request } from 'node:http'
import { connectAsync, type MqttClient } from 'mqtt'
import { generate, parser, type Packet } from 'mqtt-packet'
import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest'
import { WebSocket } from 'ws'
import { deviceEndpoints, DeviceStatus } from '#shared/contract/device.ts'
import { livePath } from '#shared/contract/live.ts'
import { mqttPath, mqttSubprotocol } from '#shared/contract/mqtt.ts'
import { systemClock } from '#shared/domain/clock.ts'
import type { HouseDevice } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, publish, record, topicOf } from './devices.ts'
import { connectPacket, pingRequest, publishPacket, subscribePacket } from './protocol/packets.ts'

let server: TestServer
let device: HouseDevice
let url: string
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  device = server.house.own.device
  url = server.url.replace('http', 'ws') + mqttPath
})
afterAll(() => server.stop())
beforeEach(async () => {
  await server.db('readings').delete()
  await server.db('rejected_messages').delete()
})

const hourAgo = systemClock.now() - 3_600_000
const storedRows = async () => Number((await server.db('readings').count())[0]?.['count'])

async function rejected() {
  const answer = await server.as('engineer').get('/api/sites/quarry-road/rejected').expect(200)
  return deviceEndpoints.rejected.response.parse(answer.body).items
}

async function statusOfDevice() {
  const answer = await server.as('engineer').get(`/api/devices/${device.id}/status`).expect(200)
  return DeviceStatus.parse(answer.body)
}

function connectByWebSocket(secret = device.secret): Promise<MqttClient> {
  return connectAsync(url, {
    username: device.username,
    password: secret,
    reconnectPeriod: 0,
    connectTimeout: 5_000,
    protocolVersion: 4,
  })
}

/** A WebSocket by hand, and the packets that have come on it. */
async function open(protocol: string | string[] = mqttSubprotocol, headers: Record<string, string> = {}) {
  const socket = new WebSocket(url, protocol, { headers })
  const packets: Packet[] = []
  const frames: boolean[] = []
  const reader = parser({ protocolVersion: 4 })
  reader.on('packet', (packet) => packets.push(packet))
  socket.on('message', (data, isBinary) => {
    frames.push(isBinary)
    if (Buffer.isBuffer(data)) reader.parse(data)
  })
  socket.on('error', () => undefined)
  const closed = new Promise<number>((resolve) => socket.on('close', resolve))
  await once(socket, 'open')
  const came = (count: number) =>
    eventually(
      () => packets,
      (seen) => seen.length >= count,
    )
  return { socket, packets, frames, closed, came }
}

const connect = () =>
  generate(connectPacket({ username: device.username, password: Buffer.from(device.secret), clientId: 'ws' }))
const reading = (celsius: number, messageId: number) =>
  generate(
    publishPacket(topicOf(device), JSON.stringify([record(1, celsius, hourAgo + messageId)]), {
      qos: 1,
      messageId,
    }),
  )

describe('MQTT over WebSocket', () => {
  test('by a common client: signs in, stores, is acknowledged after the commit, and shows in the status', async () => {
    const client = await connectByWebSocket()
    await publish(client, topicOf(device), [record(1, 71)])
    expect(await storedRows()).toBe(1)
    expect(await statusOfDevice()).toMatchObject({
      connection: 'online',
      transport: 'websocket',
      remoteAddress: '127.0.0.1',
      messages: 1,
      readings: 1,
    })
    await client.endAsync()
    expect(await eventually(statusOfDevice, ({ connection }) => connection === 'offline')).toMatchObject({
      transport: 'websocket',
    })
  })

  test('with a wrong secret is answered with return code 4', async () => {
    await expect(connectByWebSocket('wrong')).rejects.toMatchObject({ code: 4 })
  })

  test('takes over from the same client id over TCP [MQTT-3.1.4-2]', async () => {
    const first = await connectDevice(server.mqttPort, device, { clientId: 'ws' })
    const firstClosed = closing(first)
    const { socket, came } = await open()
    socket.send(connect())
    await firstClosed
    expect(await came(1)).toMatchObject([{ cmd: 'connack', returnCode: 0 }])
    socket.close()
  })
})

describe('frames', () => {
  test('[MQTT-6.0.0-4] the subprotocol is selected, also out of several, and answers are binary [MQTT-6.0.0-1]', async () => {
    const { socket, frames, came } = await open(['other', mqttSubprotocol])
    expect(socket.protocol).toBe(mqttSubprotocol)
    socket.send(connect())
    await came(1)
    expect(frames.length > 0 && frames.every(Boolean)).toBe(true)
    socket.close()
  })

  test('[MQTT-6.0.0-2] packets need not be aligned with them: byte by byte, and all in one', async () => {
    const slow = await open()
    for (const byte of Buffer.concat([connect(), reading(60, 1)])) slow.socket.send(Buffer.from([byte]))
    expect(await slow.came(2)).toMatchObject([{ cmd: 'connack' }, { cmd: 'puback', messageId: 1 }])
    slow.socket.close()
    const quick = await open()
    quick.socket.send(Buffer.concat([connect(), reading(61, 2), reading(62, 3), pingRequest]))
    await quick.came(4)
    expect(quick.packets.map(({ cmd }) => cmd).sort()).toEqual(['connack', 'pingresp', 'puback', 'puback'])
    expect(await storedRows()).toBe(3)
    quick.socket.close()
  })

  test('[MQTT-6.0.0-1] a text frame closes the connection, and nothing of it is taken', async () => {
    const { socket, came, closed } = await open()
    socket.send(connect())
    await came(1)
    socket.send(reading(60, 1).toString('latin1'))
    expect(await closed).toBe(1003)
    expect(await storedRows()).toBe(0)
  })

  test('a ping of the WebSocket itself is answered', async () => {
    const { socket } = await open()
    const pong = once(socket, 'pong')
    socket.ping('still there')
    expect(String((await pong)[0])).toBe('still there')
    socket.close()
  })

  test('a packet above 64 kB is refused at its header and on record', async () => {
    const { socket, came, closed } = await open()
    socket.send(connect())
    await came(1)
    socket.send(Buffer.from([0x32, 0xc0, 0x96, 0xb1, 0x02]))
    await closed
    expect(await eventually(rejected, (items) => items.length > 0)).toMatchObject([{ reason: 'too-large' }])
  })

  test('a frame of more than a megabyte is refused before it is read, and on record', async () => {
    const { socket, came, closed } = await open()
    socket.send(connect())
    await came(1)
    socket.send(Buffer.alloc(2 * 1024 * 1024))
    await closed
    const [item] = await eventually(rejected, (items) => items.length > 0)
    expect(item).toMatchObject({ reason: 'too-large', deviceId: device.id })
    expect(item?.detail).toContain('1048576')
  })

  test('who subscribes is given what the device publishes', async () => {
    const client = await connectByWebSocket()
    await client.subscribeAsync(topicOf(device), { qos: 1 })
    const heard = new Promise<string>((resolve) =>
      client.once('message', (_topic, payload) => resolve(payload.toString())),
    )
    await publish(client, topicOf(device), [record(1, 64)])
    expect(await heard).toContain('64')
    await client.endAsync()
  })
})

describe('the door', () => {
  /** The status that an upgrade request is answered with. */
  function answerTo(path: string, headers: Record<string, string>): Promise<number> {
    return new Promise((resolve, reject) => {
      const asked = request(server.url + path, {
        headers: {
          Connection: 'Upgrade',
          Upgrade: 'websocket',
          'Sec-WebSocket-Version': '13',
          'Sec-WebSocket-Key': Buffer.alloc(16, 1).toString('base64'),
          ...headers,
        },
      })
      asked.on('response', (response) => {
        response.resume()
        resolve(response.statusCode ?? 0)
      })
      asked.on('upgrade', (_response, socket) => {
        socket.destroy()
        resolve(101)
      })
      asked.on('error', reject)
      asked.end()
    })
  }
  const offer = { 'Sec-WebSocket-Protocol': mqttSubprotocol }

  test.each([
    ['with the subprotocol', mqttPath, offer, 101],
    ['[MQTT-6.0.0-3] without it', mqttPath, {}, 400],
    ['with an older one', mqttPath, { 'Sec-WebSocket-Protocol': 'mqttv3.1' }, 400],
    ['from a page of another origin', mqttPath, { ...offer, Origin: 'https://elsewhere.example' }, 403],
    ['from a page without an origin', mqttPath, { ...offer, Origin: 'null' }, 403],
    ['at a path that nobody has', '/elsewhere', offer, 404],
    ['at the pages’ own socket', livePath, {}, 101],
  ])('%s', async (_name, path, headers, status) => {
    expect(await answerTo(path, headers)).toBe(status)
  })

  test('from a page of this server', async () => {
    expect(await answerTo(mqttPath, { ...offer, Origin: server.url })).toBe(101)
  })

  test('is shut where there is no broker', async () => {
    const without = await startTestServer()
    const socket = new WebSocket(without.url.replace('http', 'ws') + mqttPath, mqttSubprotocol)
    expect(String(await once(socket, 'error'))).toContain('404')
    await without.stop()
  })
})

test('who has subscribed and never reads is cut off, while others go on', async () => {
  const { socket, came, closed } = await open()
  socket.send(connect())
  socket.send(generate(subscribePacket(1, [topicOf(device), 0])))
  await came(2)
  socket.pause()
  const client = await connectDevice(server.mqttPort, device, { clientId: 'sender' })
  const large = JSON.stringify([record(1, 65)]).padEnd(60_000)
  // More than the kernel's buffers take and than may wait beyond them.
  for (let count = 0; count < 300; count++) await publish(client, topicOf(device), large)
  const status = await eventually(statusOfDevice, ({ lastError }) => lastError?.kind === 'not-reading')
  expect(status.connection).toBe('online')
  socket.resume()
  await closed
  await publish(client, topicOf(device), [record(1, 65)])
  await client.endAsync()
})
