import { once } from 'node:events'
import { generate } from 'mqtt-packet'
import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { createWebSocketStream, WebSocket } from 'ws'
import { mqttPath, mqttSubprotocol } from '#shared/contract/mqtt.ts'
import { startTestServer, type TestServer } from '../../harness/server.ts'
import { record, topicOf } from '../devices.ts'
import { message } from './bare-broker.ts'
import { connectPacket, disconnect, pingRequest, publishPacket, subscribePacket } from './packets.ts'
import { openWire, wireOver, type Wire } from './wire.ts'

let server: TestServer
let url: string
let readings: string
beforeAll(async () => {
  server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  url = `${server.url.replace('http:', 'ws:')}${mqttPath}`
  readings = topicOf(server.house.own.device)
})
afterAll(() => server.stop())

function signIn(options: Parameters<typeof connectPacket>[0] = {}) {
  const { username, secret } = server.house.own.device
  return connectPacket({ username, password: Buffer.from(secret), ...options })
}

async function openSocket(): Promise<WebSocket> {
  const socket = new WebSocket(url, mqttSubprotocol)
  await once(socket, 'open')
  return socket
}

/** Its bytes both ways; it ends with the socket. */
function streamOf(socket: WebSocket) {
  return createWebSocketStream(socket, { allowHalfOpen: false })
}

/** A socket of the device, accepted, and its packets. */
async function connected(
  options: Parameters<typeof connectPacket>[0] = {},
): Promise<{ socket: WebSocket; wire: Wire }> {
  const socket = await openSocket()
  const wire = wireOver(streamOf(socket))
  wire.send(signIn(options))
  expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
  return { socket, wire }
}

/** How the server answers an opening handshake: the status of its refusal, or 101. */
async function handshake(protocols: string[]): Promise<{ status: number; protocol: string }> {
  const socket = new WebSocket(url, protocols)
  socket.on('error', () => undefined)
  return await new Promise((resolve) => {
    socket.once('unexpected-response', (_request, response) => {
      resolve({ status: response.statusCode ?? 0, protocol: '' })
      socket.terminate()
    })
    socket.once('open', () => {
      resolve({ status: 101, protocol: socket.protocol })
      socket.terminate()
    })
  })
}

describe('the opening handshake', () => {
  test('[MQTT-6.0.0-4] selects “mqtt” among what is offered [MQTT-6.0.0-3]', async () => {
    expect(await handshake(['mqtt'])).toEqual({ status: 101, protocol: 'mqtt' })
    expect(await handshake(['something', 'mqtt'])).toEqual({ status: 101, protocol: 'mqtt' })
  })

  test.each([
    ['none', []],
    ['others', ['something', 'mqttv3.1']],
  ])('[MQTT-6.0.0-3] is refused when “mqtt” is not offered: %s', async (_name, protocols) => {
    const { status } = await handshake(protocols)
    expect(status).toBeGreaterThanOrEqual(400)
    expect(status).toBeLessThan(500)
  })
})

describe('[MQTT-6.0.0-1] packets come in binary frames', () => {
  test('a text frame closes the connection, and its packet is not taken', async () => {
    const { socket } = await connected()
    const closed = once(socket, 'close')
    socket.send(
      generate(publishPacket(readings, JSON.stringify([record(1, 41)]), { qos: 1, messageId: 1 })).toString(),
    )
    await closed
    expect(await server.db('readings').where({ value: 41 }).count()).toMatchObject([{ count: 0 }])
  })

  test('a text frame before CONNECT closes it too', async () => {
    const socket = await openSocket()
    const closed = once(socket, 'close')
    socket.send('CONNECT')
    await closed
  })

  test('what the server sends is binary', async () => {
    const socket = await openSocket()
    const frame = once(socket, 'message')
    socket.send(generate(signIn()))
    expect(await frame).toEqual([Buffer.from([0x20, 2, 0, 0]), true])
    socket.terminate()
  })
})

describe('[MQTT-6.0.0-2] packets and frames need not match', () => {
  test('a packet across frames, byte by byte', async () => {
    const { socket, wire } = await connected()
    const packet = generate(
      publishPacket(readings, JSON.stringify([record(1, 42)]), { qos: 1, messageId: 7 }),
    )
    for (const byte of packet) socket.send(Buffer.from([byte]))
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 7 })
    expect(await server.db('readings').where({ value: 42 }).count()).toMatchObject([{ count: 1 }])
    await wire.cut()
  })

  test('several packets in one frame, CONNECT among them', async () => {
    const socket = await openSocket()
    const wire = wireOver(streamOf(socket))
    wire.send(
      signIn(),
      publishPacket(readings, JSON.stringify([record(2, 43)]), { qos: 1, messageId: 1 }),
      publishPacket(readings, JSON.stringify([record(2, 44)]), { qos: 1, messageId: 2 }),
    )
    expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 2 })
    await wire.cut()
  })

  test('a message in fragments', async () => {
    const { socket, wire } = await connected()
    const packet = generate(
      publishPacket(readings, JSON.stringify([record(3, 45)]), { qos: 1, messageId: 3 }),
    )
    socket.send(packet.subarray(0, 5), { fin: false, binary: true })
    socket.send(packet.subarray(5), { fin: true, binary: true })
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 3 })
    await wire.cut()
  })
})

describe('it is the same broker', () => {
  test('[MQTT-3.12.4-1] a ping is answered', async () => {
    const { wire } = await connected()
    wire.send(pingRequest)
    expect(await wire.next()).toMatchObject({ cmd: 'pingresp' })
    await wire.cut()
  })

  test('[3.2.2.3] a wrong secret is answered with return code 4, then closed [MQTT-3.2.2-5]', async () => {
    const wire = wireOver(streamOf(await openSocket()))
    wire.send(signIn({ password: Buffer.from('wrong') }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 4 }])
  })

  test('[MQTT-3.1.0-1] another packet first closes the connection', async () => {
    const wire = wireOver(streamOf(await openSocket()))
    wire.send(pingRequest)
    expect(await wire.rest()).toEqual([])
  })

  test('[MQTT-3.1.4-2] a client id is taken over from TCP to WebSocket and back', async () => {
    const tcp = openWire(server.mqttPort)
    tcp.send(signIn({ clientId: 'box' }))
    expect(await tcp.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    const { wire } = await connected({ clientId: 'box' })
    expect(await tcp.rest()).toEqual([])
    const again = openWire(server.mqttPort)
    again.send(signIn({ clientId: 'box' }))
    expect(await again.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    expect(await wire.rest()).toEqual([])
    await again.cut()
  })

  test('a message goes from one to the other', async () => {
    const { wire } = await connected({ clientId: 'reader' })
    wire.send(subscribePacket(1, [readings, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [1] })
    const tcp = openWire(server.mqttPort)
    tcp.send(signIn({ clientId: 'writer' }))
    expect(await tcp.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    const payload = JSON.stringify([record(4, 46)])
    tcp.send(publishPacket(readings, payload, { qos: 1, messageId: 1 }))
    expect(message(await wire.next())).toMatchObject({ topic: readings, payload, qos: 1 })
    await Promise.all([wire.cut(), tcp.cut()])
  })

  test('[MQTT-3.1.2-24] silence beyond one and a half keep-alive times ends it', async () => {
    const { wire } = await connected({ keepalive: 1 })
    const begin = performance.now()
    expect(await wire.rest()).toEqual([])
    expect(performance.now() - begin).toBeGreaterThan(1_400)
    expect(performance.now() - begin).toBeLessThan(3_000)
  })

  test('a packet above 64 kB is refused at its header', async () => {
    const { wire } = await connected()
    wire.send(Buffer.from([0x32, 0xc0, 0x96, 0xb1, 0x02]))
    expect(await wire.rest()).toEqual([])
  })

  test('[3.14.4] DISCONNECT ends it', async () => {
    const { wire } = await connected()
    wire.send(disconnect)
    expect(await wire.rest()).toEqual([])
  })
})
