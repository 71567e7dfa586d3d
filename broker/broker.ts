import { createServer as createTcpServer, Socket, type AddressInfo, type Server } from 'node:net'
import { createServer as createTlsServer } from 'node:tls'
import type { Duplex } from 'node:stream'
import { Aedes, type Client, type ConnectPacket, type PublishPacket } from 'aedes'
import type { Logger } from 'pino'
import { maxPayloadBytes, readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import type { DeviceMessage, DeviceStatus, Refusal, SignedInDevice } from './device.ts'
import { createGate, type Gate, type GateLimits } from './gate.ts'
import type { ScanFault } from './packet-scanner.ts'

export interface BrokerLimits extends GateLimits {
  maxConnections: number
  /** Time for CONNECT to arrive, in ms. */
  connectTimeoutMs: number
}

export interface BrokerOptions {
  port: number
  host: string
  /** Set: MQTT over TLS. */
  tls?: { cert: string; key: string } | undefined
  /** The device of a user name and secret; undefined when they do not belong together. */
  signIn: (username: string, secret: string) => Promise<SignedInDevice | undefined>
  /** Takes a message in; resolves when it is stored. Only then is it acknowledged. Rejects to have it sent again. */
  accept: (message: DeviceMessage) => Promise<unknown>
  /** A device did what it may not; its connection is closed. */
  onRefused: (refusal: Refusal) => void
  /** A device came, went, or said so itself. */
  onStatus: (device: SignedInDevice, status: DeviceStatus) => void
  log: Logger
  limits?: Partial<BrokerLimits> | undefined
}

export interface Broker {
  /** The port it listens on. */
  port: number
  /** Connections of devices that are signed in. */
  clients(): number
  /** While pressed, nothing more is taken from any socket. */
  press(on: boolean): void
  /** Serves a connection that came another way, such as a WebSocket's stream. */
  handle(socket: Duplex): void
  /** Closes every connection of a device. */
  disconnect(deviceId: number): void
  /** Takes nothing more, waits until what was taken is stored (up to the deadline), then closes every connection. */
  stop(deadlineMs?: number): Promise<void>
}

const defaultLimits: BrokerLimits = {
  maxPacketBytes: maxPayloadBytes,
  maxHeldBytes: 1024 * 1024,
  minHeldBytes: 2 * maxPayloadBytes,
  maxHeldTogether: 64 * 1024 * 1024,
  maxInFlight: 512,
  packetsPerSecond: 5000,
  burst: 10_000,
  maxConnections: 5000,
  connectTimeoutMs: 10_000,
}

/** How often silence is counted, in ms. */
const tickMs = 250

/** Return codes of CONNACK (MQTT 3.1.1, table 3.1). */
const connackCode = { unavailable: 3, badCredentials: 4, notAuthorized: 5 } as const

/** Lets a PUBLISH pass, or closes its connection. */
type Answer = (error?: Error | null) => void

/** What is known of one connection. */
interface Connection {
  gate: Gate
  keepAliveMs: number
  willTopic: string | undefined
  device: SignedInDevice | undefined
  readingsTopic: string
  statusTopic: string
  /** Counted among the connections of its device. */
  counted: boolean
}

/**
 * An MQTT 3.1.1 broker for devices: they sign in, publish readings and status under their own topic, and are
 * acknowledged once what they sent is stored. A device may subscribe to its own topics only.
 */
export async function createBroker(options: BrokerOptions): Promise<Broker> {
  const { log, signIn, accept, onRefused, onStatus } = options
  const limits = { ...defaultLimits, ...options.limits }
  const connections = new Map<Duplex, Connection>()
  const connectionsOfDevice = new Map<number, number>()
  const together = { heldBytes: 0 }
  let pressed = false
  let stopping = false
  let unsettled = 0
  let onSettled: (() => void) | undefined

  const aedes = await Aedes.createBroker({
    // With a bound here, a flood at QoS 0 with a subscriber overflows the emitter's stack.
    concurrency: 0,
    connectTimeout: limits.connectTimeoutMs,
    maxClientsIdLength: 256,
    maxInflightInbound: 20,
    preConnect: (client, packet, done) => {
      readConnect(client, packet)
      done(null, true)
    },
    authenticate: (client, username, password, done) => {
      authenticate(client, username, password).then(
        () => done(null, true),
        (error: unknown) => done(asSignInError(error), false),
      )
    },
    authorizePublish: (client, packet, done) => {
      if (client) publish(client, packet, done)
      else done(null)
    },
    authorizeSubscribe: (client, subscription, done) => {
      done(null, maySubscribe(client, subscription.topic) ? subscription : null)
    },
  })
  aedes.on('clientReady', (client) => {
    const connection = connections.get(client.conn)
    if (!connection) return
    countIn(connection)
    connection.gate.open()
  })
  aedes.on('clientError', (client, error) => {
    log.debug({ client: client.id, reason: error.message }, 'A device’s connection was closed')
  })
  aedes.on('connectionError', (_client, error) => {
    log.debug({ reason: error.message }, 'A connection was closed before it signed in')
  })
  aedes.addListener('error', (error: Error) => log.error({ err: error }, 'The broker has a fault'))

  const server = options.tls
    ? createTlsServer(options.tls, handle)
    : createTcpServer({ noDelay: true }, handle)
  await listen(server, options.port, options.host)
  const ticking = setInterval(countSilence, tickMs)
  const address = server.address()

  return {
    port: isAddress(address) ? address.port : options.port,
    clients: () => aedes.connectedClients,
    press: (on) => {
      pressed = on
      if (!on) for (const { gate } of connections.values()) gate.pump()
    },
    handle,
    disconnect: (deviceId) => {
      for (const { gate, device } of connections.values()) if (device?.deviceId === deviceId) gate.cut()
    },
    stop,
  }

  function handle(socket: Duplex): void {
    if (stopping || connections.size >= limits.maxConnections) {
      socket.on('error', () => undefined)
      socket.destroy()
      return
    }
    // Peers that vanish without a word and without an MQTT keep-alive are found by TCP's own.
    if (socket instanceof Socket) socket.setKeepAlive(true, 60_000)
    const gate: Gate = createGate(socket, limits, {
      together,
      isPressed: () => pressed || stopping,
      onFault: (fault, chunk) => refuseFault(gate.stream, fault, chunk),
      onClosed: () => forget(gate.stream),
    })
    connections.set(gate.stream, {
      gate,
      keepAliveMs: 0,
      willTopic: undefined,
      device: undefined,
      readingsTopic: '',
      statusTopic: '',
      counted: false,
    })
    aedes.handle(gate.stream)
  }

  function forget(stream: Duplex): void {
    const connection = connections.get(stream)
    connections.delete(stream)
    if (connection) countOut(connection)
  }

  function readConnect(client: Client, packet: ConnectPacket): void {
    const connection = connections.get(client.conn)
    if (!connection) return
    connection.keepAliveMs = (packet.keepalive ?? 0) * 1000
    connection.willTopic = packet.will?.topic
    // The gate counts silence, because only it knows when nothing could be heard.
    packet.keepalive = 0
    // A client id is a device's own affair: without the user name in it, one device could push out another.
    if (packet.clientId !== '' && packet.username !== undefined) {
      packet.clientId = `${packet.username}/${packet.clientId}`
    }
  }

  async function authenticate(client: Client, username?: string, password?: Buffer): Promise<void> {
    const connection = connections.get(client.conn)
    if (!connection) throw new SignInError(connackCode.unavailable, 'the connection is gone')
    if (username === undefined || password === undefined) {
      throw new SignInError(connackCode.badCredentials, 'user name or secret missing')
    }
    const device = await signIn(username, password.toString())
    if (!device) {
      log.info({ username }, 'A device gave a wrong user name or secret')
      throw new SignInError(connackCode.badCredentials, 'wrong user name or secret')
    }
    connection.device = device
    connection.readingsTopic = readingsTopic(device.siteSlug, device.deviceSlug)
    connection.statusTopic = statusTopic(device.siteSlug, device.deviceSlug)
    const { willTopic } = connection
    if (willTopic !== undefined && !isOwn(connection, willTopic)) {
      onRefused({
        device,
        topic: willTopic,
        reason: 'foreign-topic',
        detail: `its last will is for ${willTopic}, which is not its own topic`,
        payload: Buffer.alloc(0),
      })
      throw new SignInError(connackCode.notAuthorized, 'the last will is for a foreign topic')
    }
  }

  function asSignInError(error: unknown): SignInError {
    if (error instanceof SignInError) return error
    log.warn({ err: error }, 'A device could not be signed in')
    return new SignInError(connackCode.unavailable, 'sign-in is not possible just now')
  }

  /** Called for each PUBLISH, and for the last will of a client that is closed. */
  function publish(client: Client, packet: PublishPacket, done: Answer): void {
    const connection = connections.get(client.conn)
    const isWill = client.closed
    const gate = isWill ? undefined : connection?.gate
    if (connection?.device && packet.topic === connection.readingsTopic && !(isWill && stopping)) {
      takeIn(connection.device, packet, gate, done)
      return
    }
    gate?.finished()
    if (!connection?.device || (isWill && stopping)) {
      done(new Error('not connected'))
    } else if (packet.topic === connection.statusTopic) {
      const status = asBuffer(packet.payload).toString()
      if (status === 'online' || status === 'offline') onStatus(connection.device, status)
      done(null)
    } else {
      onRefused({
        device: connection.device,
        topic: packet.topic,
        reason: 'foreign-topic',
        detail: `it may publish to ${connection.readingsTopic} and ${connection.statusTopic} only`,
        payload: asBuffer(packet.payload),
      })
      done(new Error('foreign topic'))
    }
  }

  function takeIn(device: SignedInDevice, packet: PublishPacket, gate: Gate | undefined, done: Answer): void {
    unsettled++
    // At QoS 0 nobody waits for an answer; the gate still counts it until it is stored.
    const answer = packet.qos > 0 ? done : undefined
    accept({ device, topic: packet.topic, payload: asBuffer(packet.payload) }).then(
      () => settle(gate, answer, null),
      (error: unknown) => settle(gate, answer, error instanceof Error ? error : new Error(String(error))),
    )
    if (!answer) done(null)
  }

  function settle(gate: Gate | undefined, answer: Answer | undefined, error: Error | null): void {
    gate?.finished()
    answer?.(error)
    if (--unsettled === 0) onSettled?.()
  }

  function refuseFault(stream: Duplex, fault: ScanFault, chunk: Buffer): void {
    const connection = connections.get(stream)
    const device = connection?.device
    if (fault.kind === 'malformed' || !device) {
      log.info({ device: device?.username, fault: fault.kind }, 'A connection was closed for what it sent')
      return
    }
    const { topic, payload } = fault.publish
      ? beginningOfPublish(chunk.subarray(fault.bodyAt))
      : { topic: '', payload: Buffer.alloc(0) }
    onRefused({
      device,
      topic,
      reason: 'too-large',
      detail: `a packet of ${fault.bytes} bytes; at most ${limits.maxPacketBytes} are taken`,
      payload,
    })
  }

  function maySubscribe(client: Client, filter: string): boolean {
    const connection = connections.get(client.conn)
    if (!connection?.device) return false
    const below = connection.statusTopic.slice(0, -'status'.length)
    return isOwn(connection, filter) || filter === `${below}#` || filter === `${below}+`
  }

  function countIn(connection: Connection): void {
    if (!connection.device || connection.counted) return
    connection.counted = true
    const { deviceId } = connection.device
    const others = connectionsOfDevice.get(deviceId) ?? 0
    connectionsOfDevice.set(deviceId, others + 1)
    if (others === 0) onStatus(connection.device, 'online')
  }

  function countOut(connection: Connection): void {
    if (!connection.device || !connection.counted) return
    const { deviceId } = connection.device
    const others = (connectionsOfDevice.get(deviceId) ?? 1) - 1
    if (others > 0) connectionsOfDevice.set(deviceId, others)
    else {
      connectionsOfDevice.delete(deviceId)
      if (!stopping) onStatus(connection.device, 'offline')
    }
  }

  /** [MQTT-3.1.2-24]: a client that is not heard for one and a half keep-alive times is disconnected. */
  function countSilence(): void {
    for (const { gate, keepAliveMs } of connections.values()) {
      // Counted in ticks, not read from a clock: a process that was held up has not listened meanwhile.
      const silentMs = gate.countSilence(tickMs)
      if (keepAliveMs > 0 && silentMs > 1.5 * keepAliveMs) {
        log.debug('A device was silent beyond its keep-alive')
        gate.cut()
      }
    }
  }

  async function stop(deadlineMs = 10_000): Promise<void> {
    if (stopping) return
    stopping = true
    const closed = new Promise<void>((resolve) => server.close(() => resolve()))
    if (unsettled > 0) {
      await Promise.race([new Promise<void>((resolve) => (onSettled = resolve)), pause(deadlineMs)])
    }
    // The last acknowledgements are written in the turns that follow.
    await pause(20)
    clearInterval(ticking)
    await new Promise<void>((resolve) => aedes.close(resolve))
    for (const { gate } of connections.values()) gate.stream.destroy()
    await closed
  }
}

class SignInError extends Error {
  constructor(
    readonly returnCode: (typeof connackCode)[keyof typeof connackCode],
    message: string,
  ) {
    super(message)
  }
}

function isOwn(connection: Connection, topic: string): boolean {
  return topic === connection.readingsTopic || topic === connection.statusTopic
}

/** Topic and first bytes of a PUBLISH whose variable header begins here, as far as they are there. */
function beginningOfPublish(body: Buffer): { topic: string; payload: Buffer } {
  const length = body.length >= 2 ? body.readUInt16BE(0) : 0
  return {
    topic: body.toString('utf8', 2, 2 + length),
    payload: body.subarray(2 + length + 2, 2 + length + 202),
  }
}

function asBuffer(payload: Buffer | string): Buffer {
  return typeof payload === 'string' ? Buffer.from(payload) : payload
}

function isAddress(address: AddressInfo | string | null): address is AddressInfo {
  return typeof address === 'object' && address !== null
}

function listen(server: Server, port: number, host: string): Promise<void> {
  return new Promise((resolve, reject) => {
    server.once('error', reject)
    server.listen(port, host, () => {
      server.off('error', reject)
      resolve()
    })
  })
}

function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms))
}
