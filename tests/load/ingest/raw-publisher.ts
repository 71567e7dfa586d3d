import { connect, type Socket } from 'node:net'
import { once } from 'node:events'
import { performance } from 'node:perf_hooks'
import { systemClock } from '#shared/domain/clock.ts'
import { connectPacket, createPacketMaker, type PacketMaker } from './packets.ts'

export interface LoadDevice {
  username: string
  secret: string
  topic: string
}

/** What is to be published, by one connection for each device. */
export interface Load {
  port: number
  devices: LoadDevice[]
  readings: 1 | 6
  /** Messages without an acknowledgement a connection may have. */
  window: number
  /** Messages a second of all together, sent on time whatever comes back; 0: as fast as acknowledgements come. */
  perSecond: number
  warmUpMs: number
  measureMs: number
}

export interface LoadResult {
  /** All of them were acknowledged. */
  sent: number
  /** Acknowledged in the measured time, a second. */
  perSecond: number
  /** From when a message was due to its acknowledgement, in ms; of the measured time. */
  medianMs: number
  p99Ms: number
  maxMs: number
}

/** Steps in which messages are sent on time, in ms. */
const tickMs = 1
/** How long the last acknowledgements may take, in ms. */
const patienceMs = 60_000

/** Publishes at QoS 1 over plain sockets: so little work that it is the broker's rate that is measured. */
export async function publishLoad(load: Load): Promise<LoadResult> {
  const connections = await Promise.all(
    load.devices.map((device, index) => openConnection(load, device, index)),
  )
  const startedAt = performance.now()
  const from = startedAt + load.warmUpMs
  const to = from + load.measureMs
  const measured = { from, to, acknowledged: 0, delays: new Float32Array(4_000_000) }
  await (load.perSecond > 0 ? sendOnTime : sendOnAnswer)(load, connections, startedAt, measured)
  let sent = 0
  for (const { socket, ...connection } of connections) {
    sent += connection.sent
    socket.end(Buffer.from([0xe0, 0]))
  }
  const delays = measured.delays.subarray(0, Math.min(measured.acknowledged, measured.delays.length)).sort()
  const quantile = (share: number) =>
    delays[Math.min(delays.length - 1, Math.floor(share * delays.length))] ?? 0
  return {
    sent,
    perSecond: (measured.acknowledged / load.measureMs) * 1000,
    medianMs: quantile(0.5),
    p99Ms: quantile(0.99),
    maxMs: quantile(1),
  }
}

interface Connection {
  socket: Socket
  maker: PacketMaker
  nextId: number
  sent: number
  acknowledged: number
  /** When each message under way was due, by its id. */
  dueAt: Float64Array
  /** Bytes of an acknowledgement that has not come whole. */
  rest: Buffer
}

interface Measured {
  from: number
  to: number
  acknowledged: number
  delays: Float32Array
}

async function openConnection(load: Load, device: LoadDevice, index: number): Promise<Connection> {
  const socket = connect({ port: load.port, host: '127.0.0.1', noDelay: true })
  await once(socket, 'connect')
  socket.write(connectPacket(`load-${index}`, device.username, device.secret))
  const answer: unknown = (await once(socket, 'data'))[0]
  if (!Buffer.isBuffer(answer) || answer.length < 4 || answer[0] !== 0x20 || answer[3] !== 0) {
    throw new Error(`The broker did not let ${device.username} in.`)
  }
  return {
    socket,
    maker: createPacketMaker(device.topic, load.readings),
    nextId: 1,
    sent: 0,
    acknowledged: 0,
    dueAt: new Float64Array(65_536),
    rest: Buffer.alloc(0),
  }
}

/** As many as the window holds, and another one for each that comes back. */
function sendOnAnswer(
  { window }: Load,
  connections: readonly Connection[],
  _startedAt: number,
  measured: Measured,
): Promise<void> {
  return untilAllAnswered(connections, measured, (connection, now) => {
    const room = window - (connection.sent - connection.acknowledged)
    if (now < measured.to && room > 0) send(connection, room, now)
  })
}

/** At a steady rate: what is late is sent later and counts as late. */
function sendOnTime(
  { perSecond }: Load,
  connections: readonly Connection[],
  startedAt: number,
  measured: Measured,
): Promise<void> {
  let due = 0
  const ticking = setInterval(() => {
    const now = performance.now()
    for (; dueAtOf(due) <= now && dueAtOf(due) < measured.to; due++) {
      const connection = connections[due % connections.length]
      if (connection) send(connection, 1, dueAtOf(due))
    }
    if (dueAtOf(due) >= measured.to) clearInterval(ticking)
  }, tickMs)
  const dueAtOf = (message: number) => startedAt + (message / perSecond) * 1000
  return untilAllAnswered(connections, measured, () => undefined)
}

function send(connection: Connection, count: number, dueAt: number): void {
  const { maker, dueAt: dueAts, socket } = connection
  const packets = Buffer.allocUnsafe(count * maker.size)
  const nowMs = systemClock.now()
  for (let index = 0; index < count; index++) {
    const id = connection.nextId
    connection.nextId = id === 65_535 ? 1 : id + 1
    maker.write(packets, index * maker.size, id, nowMs)
    dueAts[id] = dueAt
  }
  connection.sent += count
  socket.write(packets)
}

function untilAllAnswered(
  connections: readonly Connection[],
  measured: Measured,
  onAnswers: (connection: Connection, now: number) => void,
): Promise<void> {
  return new Promise((resolve, reject) => {
    const leftMs = measured.to - performance.now()
    const deadline = setTimeout(() => reject(new Error('Acknowledgements are missing.')), leftMs + patienceMs)
    const resolveWhenDone = () => {
      if (performance.now() < measured.to) return
      if (connections.some(({ sent, acknowledged }) => sent > acknowledged)) return
      clearTimeout(deadline)
      resolve()
    }
    setTimeout(resolveWhenDone, leftMs + 10 * tickMs)
    for (const connection of connections) {
      connection.socket.on('data', (chunk) => {
        const now = performance.now()
        countAnswers(connection, chunk, now, measured)
        onAnswers(connection, now)
        resolveWhenDone()
      })
      connection.socket.on('close', () => reject(new Error('The broker closed a connection.')))
      connection.socket.on('error', reject)
      onAnswers(connection, performance.now())
    }
  })
}

/** PUBACK: four bytes, 0x40 0x02 and the message's id (section 3.4). */
function countAnswers(connection: Connection, chunk: Buffer, now: number, measured: Measured): void {
  const bytes = connection.rest.length > 0 ? Buffer.concat([connection.rest, chunk]) : chunk
  const whole = bytes.length - (bytes.length % 4)
  const counts = now >= measured.from && now < measured.to
  for (let at = 0; at < whole; at += 4) {
    if (bytes[at] !== 0x40 || bytes[at + 1] !== 2)
      throw new Error('The broker sent something else than PUBACK.')
    connection.acknowledged++
    if (counts) {
      const id = ((bytes[at + 2] ?? 0) << 8) | (bytes[at + 3] ?? 0)
      measured.delays[measured.acknowledged++] = now - (connection.dueAt[id] ?? 0)
    }
  }
  connection.rest = bytes.subarray(whole)
}
