import { connect, createServer, type Socket } from 'node:net'
import { once } from 'node:events'
import { generate } from 'mqtt-packet'
import { afterEach, describe, expect, test } from 'vitest'
import { z } from 'zod'
import { createGate, type Gate, type GateLimits } from './gate.ts'
import { usualLimits } from './limits.ts'
import { createTokenBucket } from './token-bucket.ts'

const open: { destroy: () => unknown }[] = []
const servers: { close: () => unknown }[] = []
afterEach(() => {
  for (const socket of open.splice(0)) socket.destroy()
  for (const server of servers.splice(0)) server.close()
})

/** A client's socket and the gate at its other end, through the kernel. */
async function makeGate(limits: Partial<GateLimits> = {}, togetherPerSecond = 1e6) {
  const pressure = { on: false }
  const faults: string[] = []
  const server = createServer()
  servers.push(server)
  server.listen(0, '127.0.0.1')
  await once(server, 'listening')
  const accepted = new Promise<Socket>((resolve) => server.once('connection', resolve))
  const client = connect(z.object({ port: z.number() }).parse(server.address()).port, '127.0.0.1')
  const socket = await accepted
  const gate = createGate(
    socket,
    { ...usualLimits, ...limits },
    {
      together: { heldBytes: 0, unacknowledged: createTokenBucket(togetherPerSecond, togetherPerSecond) },
      isPressed: () => pressure.on,
      onFault: ({ kind }) => faults.push(kind),
      onClosed: () => undefined,
    },
  )
  open.push(client, socket, gate.stream)
  const passed = { bytes: 0, ended: false }
  gate.stream.on('data', (chunk: Buffer) => (passed.bytes += chunk.length))
  gate.stream.on('end', () => (passed.ended = true))
  client.write(connectPacket)
  await until(() => passed.bytes === connectPacket.length)
  return { client, socket, gate, passed, pressure, faults }
}

const connectPacket = generate({
  cmd: 'connect',
  protocolId: 'MQTT',
  protocolVersion: 4,
  clean: true,
  clientId: 'x',
  keepalive: 0,
})
const publishPacket = generate({
  cmd: 'publish',
  topic: 'a/b',
  payload: 'x'.repeat(93),
  qos: 0,
  dup: false,
  retain: false,
})
const publishes = (count: number) => Buffer.concat(Array.from({ length: count }, () => publishPacket))
const ping = Buffer.from([0xc0, 0])

describe('createGate', () => {
  test('lets CONNECT through and nothing more until the client is connected', async () => {
    const { client, gate, passed } = await makeGate()
    client.write(publishes(3))
    await rest()
    expect(passed.bytes).toBe(connectPacket.length)
    gate.open()
    await until(() => passed.bytes === connectPacket.length + 300)
  })

  test('lets through no more PUBLISH than may be under way, and more as they finish', async () => {
    const { client, gate, passed } = await makeGate({ maxInFlight: 10 })
    gate.open()
    client.write(publishes(25))
    await until(() => published(passed) === 10)
    await rest()
    expect(published(passed)).toBe(10)
    finish(gate, 10)
    await until(() => published(passed) === 20)
    finish(gate, 10)
    await until(() => published(passed) === 25)
  })

  test('lets through no more than the client’s rate', async () => {
    const { client, gate, passed } = await makeGate({ packetsPerSecond: 100, burst: 20 })
    gate.open()
    const begin = performance.now()
    client.write(publishes(70))
    await until(() => published(passed) === 70)
    const seconds = (performance.now() - begin) / 1000
    // Twenty at once, then fifty at a hundred a second.
    expect(seconds).toBeGreaterThan(0.4)
    expect(seconds).toBeLessThan(1.5)
  })

  test('lets through no more at QoS 0 than all clients together may, and QoS 1 all the same', async () => {
    const { client, gate, passed } = await makeGate({}, 20)
    gate.open()
    const other = await makeGate({}, 20)
    other.gate.open()
    client.write(publishes(30))
    await until(() => published(passed) === 20)
    await rest()
    expect(published(passed)).toBeLessThan(25)
    const acknowledged = Buffer.from(publishPacket)
    acknowledged[0] = 0x32
    other.client.write(Buffer.concat(Array.from({ length: 30 }, () => acknowledged)))
    await until(() => published(other.passed) === 30)
  })

  test('answers pings while everything else has to wait, and does not read without end', async () => {
    const { client, gate, socket, passed, pressure } = await makeGate({ maxHeldBytes: 100_000 })
    gate.open()
    pressure.on = true
    let answers = 0
    client.on('data', (chunk: Buffer) => (answers += chunk.length / 2))
    client.write(Buffer.concat([publishes(100), ping, publishes(100), ping]))
    await until(() => answers === 2)
    expect(published(passed)).toBe(0)
    client.write(publishes(100_000))
    await until(() => socket.isPaused())
    expect(gate.countSilence(60_000)).toBe(0)
    pressure.on = false
    gate.pump()
    // Half of what may be under way has to finish before more goes on.
    const finishing = setInterval(() => finish(gate, 400), 1)
    await until(() => published(passed) > 5_000)
    clearInterval(finishing)
  })

  test('passes on what came before the end of the connection, then the end', async () => {
    const { client, gate, passed } = await makeGate({ maxInFlight: 10 })
    gate.open()
    client.end(publishes(20))
    await until(() => published(passed) === 10)
    expect(passed.ended).toBe(false)
    finish(gate, 10)
    await until(() => published(passed) === 20 && passed.ended)
  })

  test('cuts a connection at the header of a packet that is too large', async () => {
    const { client, gate, faults } = await makeGate()
    gate.open()
    const closed = once(client, 'close')
    client.write(Buffer.from([0x30, 0xc0, 0x96, 0xb1, 0x02]))
    await closed
    expect(faults).toEqual(['too-large'])
  })

  test('counts silence, and starts again with every byte', async () => {
    const { client, gate } = await makeGate()
    gate.open()
    expect(gate.countSilence(250)).toBe(250)
    expect(gate.countSilence(250)).toBe(500)
    client.write(ping)
    await once(client, 'data')
    expect(gate.countSilence(250)).toBe(250)
  })

  test('writes what the broker writes, in order', async () => {
    const { client, gate } = await makeGate()
    gate.open()
    const received: Buffer[] = []
    client.on('data', (chunk: Buffer) => received.push(chunk))
    gate.stream.cork()
    for (let index = 0; index < 200; index++) gate.stream.write(Buffer.from([index]))
    gate.stream.uncork()
    await until(() => Buffer.concat(received).length === 200)
    expect([...Buffer.concat(received)]).toEqual(Array.from({ length: 200 }, (_, index) => index))
  })
})

const published = ({ bytes }: { bytes: number }) => (bytes - connectPacket.length) / publishPacket.length

function finish(gate: Gate, count: number): void {
  for (let index = 0; index < count; index++) gate.finished()
}

/** Time for what should not happen to happen. */
const rest = () => new Promise((resolve) => setTimeout(resolve, 50))

async function until(isSo: () => boolean): Promise<void> {
  const deadline = performance.now() + 5_000
  while (!isSo()) {
    if (performance.now() > deadline) throw new Error('It did not happen within five seconds.')
    await new Promise((resolve) => setTimeout(resolve, 2))
  }
}
