import { createServer as createTcpServer, Socket, type AddressInfo, type Server } from 'node:net'
import { createServer as createTlsServer } from 'node:tls'
import type { Duplex } from 'node:stream'
import { Aedes } from 'aedes'
import type { Logger } from 'pino'
import { createConnection, isOwnFilter, type Connection } from './connection.ts'
import type { DeviceMessage, DeviceStatus, Refusal, SignedInDevice } from './device.ts'
import { createGate, type Gate } from './gate.ts'
import { createIntake } from './intake.ts'
import { usualLimits, type BrokerLimits } from './limits.ts'
import type { ScanFault } from './packet-scanner.ts'
import { createPresence } from './presence.ts'
import { readConnect, signInConnection } from './sign-in.ts'
import { createTokenBucket } from './token-bucket.ts'

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
  clients: () => number
  /** While pressed, nothing more is taken from any socket. */
  press: (on: boolean) => void
  /** Serves a connection that came another way, such as a WebSocket's stream. */
  handle: (socket: Duplex) => void
  /** Closes every connection of a device. */
  disconnect: (deviceId: number) => void
  /** Takes nothing more, waits until what was taken is stored (up to the deadline), then closes every connection. */
  stop: (deadlineMs?: number) => Promise<void>
}

/** How often silence is counted, in ms. */
const tickMs = 250

/**
 * An MQTT 3.1.1 broker for devices: they sign in, publish readings and status under their own topic, and are
 * acknowledged once what they sent is stored. A device may subscribe to its own topics only.
 */
export async function createBroker(options: BrokerOptions): Promise<Broker> {
  const { log, onRefused } = options
  const limits = { ...usualLimits, ...options.limits }
  const connections = new Set<Connection>()
  /** Also those that are gone: a last will is published in their name. */
  const byStream = new WeakMap<Duplex, Connection>()
  const together = {
    heldBytes: 0,
    unacknowledged: createTokenBucket(limits.unacknowledgedPerSecond, limits.unacknowledgedPerSecond / 10),
  }
  const intake = createIntake(options)
  const presence = createPresence((device, status) => {
    // That the server goes says nothing of its devices.
    if (!stopping) options.onStatus(device, status)
  })
  let pressed = false
  let stopping = false

  const aedes = await Aedes.createBroker({
    // With a bound here, a flood at QoS 0 with a subscriber overflows the emitter's stack.
    concurrency: 0,
    connectTimeout: limits.connectTimeoutMs,
    maxClientsIdLength: 256,
    maxInflightInbound: 20,
    preConnect: (client, packet, done) => {
      const connection = byStream.get(client.conn)
      if (connection) readConnect(connection, packet)
      done(null, connection !== undefined)
    },
    authenticate: (client, username, password, done) => {
      const connection = byStream.get(client.conn)
      if (!connection) return
      void signInConnection(connection, { username, password }, options).then((error) =>
        done(error, error === null),
      )
    },
    // Its callback is what an acknowledgement waits for: the library writes PUBACK before it publishes.
    authorizePublish: (client, packet, done) => {
      const connection = client ? byStream.get(client.conn) : undefined
      if (!client?.closed) intake.publish(connection, packet, done)
      else if (!stopping) intake.will(connection, packet, done)
      else done(new Error('stopping'))
    },
    authorizeSubscribe: (client, subscription, done) => {
      const connection = byStream.get(client.conn)
      done(null, connection && isOwnFilter(connection, subscription.topic) ? subscription : null)
    },
  })
  aedes.on('clientReady', (client) => {
    const connection = byStream.get(client.conn)
    if (!connection) return
    presence.arrive(connection)
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
      onFault: (fault, chunk) => refuseFault(connection.device, fault, chunk),
      onClosed: () => {
        connections.delete(connection)
        presence.leave(connection)
      },
    })
    const connection = createConnection(gate)
    connections.add(connection)
    byStream.set(gate.stream, connection)
    aedes.handle(gate.stream)
  }

  function refuseFault(device: SignedInDevice | undefined, fault: ScanFault, chunk: Buffer): void {
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

  /** [MQTT-3.1.2-24]: a client that is not heard for one and a half keep-alive times is disconnected. */
  function countSilence(): void {
    for (const { gate, keepAliveMs, device } of connections) {
      // Counted in ticks, not read from a clock: a process that was held up has not listened meanwhile.
      const silentMs = gate.countSilence(tickMs)
      if (keepAliveMs > 0 && silentMs > 1.5 * keepAliveMs) {
        log.debug({ device: device?.username }, 'A device was silent beyond its keep-alive')
        gate.cut()
      }
    }
  }

  return {
    port: isAddress(address) ? address.port : options.port,
    clients: presence.count,
    press: (on) => {
      pressed = on
      if (!on) for (const { gate } of connections) gate.pump()
    },
    handle,
    disconnect: (deviceId) => {
      for (const { gate, device } of connections) if (device?.deviceId === deviceId) gate.cut()
    },
    stop: async (deadlineMs = 10_000) => {
      if (stopping) return
      stopping = true
      const closed = new Promise<void>((resolve) => server.close(() => resolve()))
      await intake.settled(deadlineMs)
      // The last acknowledgements are written in the turns that follow.
      await new Promise((resolve) => setTimeout(resolve, 20))
      clearInterval(ticking)
      await new Promise<void>((resolve) => aedes.close(resolve))
      for (const { gate } of connections) gate.stream.destroy()
      await closed
    },
  }
}

/** Topic and first bytes of a PUBLISH whose variable header begins here, as far as they are there. */
function beginningOfPublish(body: Buffer): { topic: string; payload: Buffer } {
  const length = body.length >= 2 ? body.readUInt16BE(0) : 0
  return {
    topic: body.toString('utf8', 2, 2 + length),
    payload: body.subarray(2 + length + 2, 2 + length + 202),
  }
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
