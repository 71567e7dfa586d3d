import { connect, createServer, type Socket } from 'node:net'
import { once } from 'node:events'
import { generate, type IPublishPacket } from 'mqtt-packet'
import { afterEach, expect, test } from 'vitest'
import { z } from 'zod'
import { assignDevice, createConnection } from './connection.ts'
import { createGate } from './gate.ts'
import type { Answer } from './intake.ts'
import { usualLimits } from './limits.ts'
import { createShortcut } from './shortcut.ts'
import { createTokenBucket } from './token-bucket.ts'

const open: { destroy: () => unknown }[] = []
const servers: { close: () => unknown }[] = []
afterEach(() => {
  for (const socket of open.splice(0)) socket.destroy()
  for (const server of servers.splice(0)) server.close()
})

const box = { deviceId: 7, secretId: 1, username: 'a.b', deviceSlug: 'b', siteId: 1, siteSlug: 'a' }
const readings = 'coalhand/a/b/readings'

/** A signed-in client's socket, a gate with its shortcut at the other end, and what came out where. */
async function signedIn({ hasListeners = false } = {}) {
  const server = createServer()
  servers.push(server)
  server.listen(0, '127.0.0.1')
  await once(server, 'listening')
  const accepted = new Promise<Socket>((resolve) => server.once('connection', resolve))
  const client = connect(z.object({ port: z.number() }).parse(server.address()).port, '127.0.0.1')
  const socket = await accepted
  const taken: { payload: string; answer: Answer }[] = []
  const pressed = { large: false }
  const gate = createGate(socket, usualLimits, {
    together: { heldBytes: 0, unacknowledged: createTokenBucket(1e6, 1e6) },
    isPressed: (large) => large && pressed.large,
    shortcut: createShortcut({
      connection: () => connection,
      intake: {
        readings: ({ payload }, answer) => void taken.push({ payload: payload.toString(), answer }),
      },
      hasListeners: () => hasListeners,
    }),
    onFault: () => undefined,
    onClosed: () => undefined,
  })
  const connection = createConnection(gate, { transport: 'mqtt', remoteAddress: '127.0.0.1' })
  open.push(client, socket, gate.stream)
  const inStream: Buffer[] = []
  gate.stream.on('data', (chunk: Buffer) => inStream.push(chunk))
  const answers: Buffer[] = []
  client.on('data', (chunk) => answers.push(chunk))
  client.write(
    generate({ cmd: 'connect', clientId: 'x', protocolId: 'MQTT', protocolVersion: 4, clean: true }),
  )
  await until(() => inStream.length === 1)
  inStream.length = 0
  assignDevice(connection, box)
  gate.open()
  return {
    client,
    gate,
    taken,
    pressed,
    inStream: () => Buffer.concat(inStream),
    answers: () => Buffer.concat(answers),
  }
}

function publish(messageId: number, payload: string, options: Partial<IPublishPacket> = {}): Buffer {
  return generate({
    ...{ cmd: 'publish', topic: readings, payload, qos: 1, messageId, dup: false, retain: false },
    ...options,
  })
}

const puback = (...ids: number[]) => Buffer.from(ids.flatMap((id) => [0x40, 2, id >> 8, id & 255]))

test('readings go straight to be stored, and are acknowledged in their order', async () => {
  const { client, taken, inStream, answers } = await signedIn()
  client.write(Buffer.concat([publish(1, 'one'), publish(2, 'two'), publish(0, 'loose', { qos: 0 })]))
  await until(() => taken.length === 3)
  expect(taken.map(({ payload }) => payload)).toEqual(['one', 'two', 'loose'])
  taken[1]?.answer()
  await new Promise((resolve) => setImmediate(resolve))
  taken[0]?.answer()
  taken[2]?.answer()
  await until(() => answers().length === 8)
  expect(answers()).toEqual(puback(1, 2))
  expect(inStream()).toHaveLength(0)
})

test('a packet that comes in pieces is taken whole', async () => {
  const { client, taken } = await signedIn()
  const packet = publish(9, 'x'.repeat(500))
  for (let from = 0; from < packet.length; from += 7) {
    client.write(packet.subarray(from, from + 7))
    await new Promise((resolve) => setImmediate(resolve))
  }
  await until(() => taken.length === 1)
  expect(taken[0]?.payload).toBe('x'.repeat(500))
})

test('another PUBLISH waits until those before it are acknowledged, and is not overtaken', async () => {
  const { client, gate, taken, inStream, answers } = await signedIn()
  const status = publish(2, 'online', { topic: 'coalhand/a/b/status', retain: true })
  client.write(Buffer.concat([publish(1, 'one'), status, publish(3, 'three')]))
  await until(() => taken.length === 1)
  expect(inStream()).toHaveLength(0)
  taken[0]?.answer()
  // Both go into the stream now: the third may not overtake the second.
  await until(() => inStream().length > status.length)
  expect(answers()).toEqual(puback(1))
  expect(inStream()).toEqual(Buffer.concat([status, publish(3, 'three')]))
  gate.finished()
  gate.finished()
  client.write(publish(4, 'four'))
  await until(() => taken.length === 2)
  expect(taken[1]?.payload).toBe('four')
})

test('who has subscribed, now or in a session that is kept, gets everything through the library', async () => {
  const packet = publish(1, 'one')
  const subscribe = generate({
    cmd: 'subscribe',
    messageId: 5,
    subscriptions: [{ topic: readings, qos: 0 }],
  })
  const now = await signedIn()
  now.client.write(Buffer.concat([subscribe, packet]))
  await until(() => now.inStream().length === subscribe.length + packet.length)
  const kept = await signedIn({ hasListeners: true })
  kept.client.write(packet)
  await until(() => kept.inStream().length === packet.length)
  expect([...now.taken, ...kept.taken]).toEqual([])
})

test('large packs wait while there is no room for them, two of a client at most are under way', async () => {
  const { client, gate, taken, pressed } = await signedIn()
  const large = 'x'.repeat(usualLimits.largeBytes)
  client.write(Buffer.concat([1, 2, 3].map((id) => publish(id, large))))
  await until(() => taken.length === 2)
  pressed.large = true
  taken[0]?.answer()
  gate.pump()
  expect(taken).toHaveLength(2)
  pressed.large = false
  gate.pump()
  expect(taken).toHaveLength(3)
})

test('what cannot be stored is not acknowledged: the connection ends', async () => {
  const { client, taken, answers } = await signedIn()
  client.write(Buffer.concat([publish(1, 'one'), publish(2, 'two')]))
  await until(() => taken.length === 2)
  const closed = once(client, 'close')
  taken[0]?.answer(new Error('no room'))
  taken[1]?.answer()
  await closed
  expect(answers()).toHaveLength(0)
})

async function until(isSo: () => boolean): Promise<void> {
  const deadline = performance.now() + 5000
  while (!isSo()) {
    if (performance.now() > deadline) throw new Error('It did not come to that.')
    await new Promise((resolve) => setTimeout(resolve, 2))
  }
}
