import { performance } from 'node:perf_hooks'
import { createServer as createTcpServer, Socket } from 'node:net'
import { createServer as createTlsServer } from 'node:tls'
import type { Duplex } from 'node:stream'
import { Aedes, type Client, type PublishPacket } from 'aedes'
import type { Logger } from 'pino'
import { createConnection, isOwnFilter, isOwnTopic, type Connection } from './connection.ts'
import type {
  DeviceMessage,
  DeviceStatus,
  Ending,
  LiveConnection,
  Origin,
  Refusal,
  SignedInDevice,
  Trouble,
} from './device.ts'
import { patienceWith, troubleOf } from './endings.ts'
import { tooLarge } from './faults.ts'
import { createGate, type Gate } from './gate.ts'
import { createIntake, type Answer } from './intake.ts'
import { usualLimits, type BrokerLimits } from './limits.ts'
import type { ScanFault } from './packet-scanner.ts'
import { listen, plainAddress } from './listen.ts'
import { createPresence } from './presence.ts'
import { createSessionStore } from './session-store.ts'
import { createShortcut } from './shortcut.ts'
import { faultOfConnect, isIllFormed, readConnect, signInConnection } from './sign-in.ts'
import { createTokenBucket } from './token-bucket.ts'
import { createTurns } from './turns.ts'

export interface BrokerOptions {
  port: number
  host: string
  /** Set: MQTT over TLS. */
  tls?: { cert: string; key: string } | undefined
  /** The device of a user name and secret; undefined when they do not belong together. */
  signIn: (username: string, secret: string, origin: Origin) => Promise<SignedInDevice | undefined>
  /** Takes a message in; resolves when it is stored. Only then is it acknowledged. Rejects to have it sent again. */
  accept: (message: DeviceMessage) => Promise<unknown>
  /** A device did what it may not; its connection is closed. */
  onRefused: (refusal: Refusal) => void
  /** A device came or went; `connection` is its newest one. Also when that is another, while it stays online. */
  onStatus: (device: SignedInDevice, status: DeviceStatus, connection: LiveConnection) => void
  /** A connection ended otherwise than by its device's DISCONNECT. */
  onTrouble?: ((trouble: Trouble) => void) | undefined
  log: Logger
  limits?: Partial<BrokerLimits> | undefined
}

export interface Broker {
  /** The port it listens on. */
  port: number
  /** Connections of devices that are signed in. */
  clients: () => number
  /** While pressed, nothing more is taken from any socket; or nothing large, and the rest goes on. */
  press: (on: boolean, what?: 'all' | 'large') => void
  /** Serves a connection that came another way, such as a WebSocket's stream. */
  handle: (socket: Duplex, origin: Origin) => void
  /** The connections of devices that are signed in. */
  connections: () => LiveConnection[]
  /** Closes every connection that was made with one of these secrets, because they are good no more. */
  endSecrets: (secretIds: ReadonlySet<number>) => void
  /** Takes nothing more, waits until what was taken is stored (up to the deadline), then closes every connection. */
  stop: (deadlineMs?: number) => Promise<void>
}

/** How often silence is counted, in ms. */
const tickMs = 250
/** The library's own patience with a CONNECT: the gate has ours, and some must wait for their turn. */
const withoutEndMs = 2 ** 31 - 1

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
  const intake = createIntake({ ...options, limits })
  const presence = createPresence((device, status, connection) => {
    // That the server goes says nothing of its devices.
    if (!stopping) options.onStatus(device, status, connection)
  })
  const turns = createTurns(createTokenBucket(limits.connectsPerSecond, limits.connectBurst))
  /** Devices that have listened to their own topics; once is for ever, as a session may be kept. */
  const listeners = new Set<number>()
  /** Devices that did not read what they had subscribed to: until when they may not subscribe again. */
  const deafUntil = new Map<number, number>()
  const pressed = { all: false, large: false }
  /** Whose turn it is when there is room again. */
  let turn = 0
  let stopping = false

  const sessions = createSessionStore({
    ...limits,
    prefixOf: ({ conn }) => byStream.get(conn)?.statusTopic.replace(/status$/, '') || undefined,
    isConnected: (sessionId) => [...connections].some((one) => one.present && one.sessionId === sessionId),
  })

  const aedes = await Aedes.createBroker({
    // With a bound here, a flood at QoS 0 with a subscriber overflows the emitter's stack.
    concurrency: 0,
    connectTimeout: withoutEndMs,
    maxClientsIdLength: limits.maxClientIdBytes + 256,
    maxInflightInbound: 20,
    persistence: sessions,
    preConnect: (client, packet, done) => {
      const connection = byStream.get(client.conn)
      const fault = faultOfConnect(packet)
      if (fault) {
        done(fault, false)
        return
      }
      if (connection) readConnect(connection, packet)
      done(null, connection !== undefined)
    },
    authenticate: (client, username, password, done) => {
      const connection = byStream.get(client.conn)
      if (!connection) return
      void signInConnection(connection, { username, password }, { ...options, limits }).then((error) => {
        if (error) connection.ending = 'told'
        else if (!client.closed) announceTakeover(connection)
        done(error, error === null)
      })
    },
    // Its callback is what an acknowledgement waits for: the library writes PUBACK before it publishes.
    authorizePublish: (client, packet, done) => {
      const connection = client ? byStream.get(client.conn) : undefined
      // [MQTT-3.3.1-3]: whether a device repeats itself is nothing to those who subscribe.
      packet.dup = false
      if (client && !client.closed) {
        // In the same turn the library would parse on within its own parsing, and take bytes twice.
        const later: Answer = (error) => queueMicrotask(() => done(error))
        void publish(client, connection, packet, later)
      } else if (stopping) done(new Error('stopping'))
      else {
        intake.will(connection, packet, (error) => {
          done(error)
          if (!error && connection) correctStatus(connection, packet.topic)
        })
      }
    },
    authorizeForward: (client, packet) => {
      const connection = byStream.get(client.conn)
      if (!connection || !isOwnTopic(connection, packet.topic)) return null
      if (connection.gate.unreadBytes() <= limits.maxUnreadBytes) return packet
      if (connection.device) {
        deafUntil.set(connection.device.deviceId, performance.now() + limits.deafForMs)
      }
      end(connection, 'not-reading')
      return null
    },
    authorizeSubscribe: (client, subscription, done) => {
      const connection = byStream.get(client.conn)
      if (isIllFormed(subscription.topic)) {
        done(new Error('the filter is not well-formed text'))
        return
      }
      const device = connection && isOwnFilter(connection, subscription.topic) ? connection.device : undefined
      // Sent megabytes again and again that nobody reads, it would cost the others their time.
      const granted = device !== undefined && performance.now() >= (deafUntil.get(device.deviceId) ?? 0)
      if (granted) listeners.add(device.deviceId)
      done(null, granted ? subscription : null)
    },
  })
  aedes.on('clientReady', (client) => {
    const connection = byStream.get(client.conn)
    if (!connection) return
    presence.arrive(connection)
    connection.gate.open()
    const ofDevice = connection.device ? presence.of(connection.device.deviceId) : []
    const [oldest] = ofDevice
    if (oldest && ofDevice.length > limits.maxConnectionsPerDevice) end(oldest, 'too-many-connections')
  })
  aedes.on('clientError', (client, error) => {
    log.debug({ client: client.id, reason: error.message }, 'A device’s connection was closed')
  })
  aedes.on('connectionError', (_client, error) => {
    log.debug({ reason: error.message }, 'A connection was closed before it signed in')
  })
  aedes.addListener('error', (error: Error) => log.error({ err: error }, 'The broker has a fault'))

  const take = (socket: Socket) => {
    handle(socket, { transport: 'mqtt', remoteAddress: plainAddress(socket.remoteAddress) })
  }
  const server = options.tls
    ? createTlsServer({ ...options.tls, handshakeTimeout: limits.connectTimeoutMs }, take)
    : createTcpServer({ noDelay: true }, take)
  const port = await listen(server, options.port, options.host)
  const ticking = setInterval(countSilence, tickMs)

  function handle(socket: Duplex, origin: Origin): void {
    if (stopping || (connections.size >= limits.maxConnections && !makeRoom())) {
      socket.on('error', () => undefined)
      socket.destroy()
      return
    }
    // Peers that vanish without a word and without an MQTT keep-alive are found by TCP's own.
    if (socket instanceof Socket) socket.setKeepAlive(true, 60_000)
    const gate: Gate = createGate(socket, limits, {
      together,
      isPressed: (large) => pressed.all || stopping || (large && pressed.large),
      admit: turns.wait,
      shortcut: createShortcut({
        connection: () => connection,
        intake,
        hasListeners: (deviceId) => listeners.has(deviceId),
      }),
      onFault: (fault, chunk) => refuseFault(connection, fault, chunk),
      onClosed: (error) => {
        connections.delete(connection)
        if (connection.present) tellEnding(connection, error)
        presence.leave(connection)
      },
    })
    const connection = createConnection(gate, origin)
    connections.add(connection)
    byStream.set(gate.stream, connection)
    aedes.handle(gate.stream)
  }

  /** Whoever holds a place without having signed in gives it up to a newcomer. */
  function makeRoom(): boolean {
    for (const { device, gate } of connections) {
      if (device) continue
      gate.cut()
      return true
    }
    return false
  }

  function refuseFault(connection: Connection, fault: ScanFault, chunk: Buffer): void {
    const { device } = connection
    connection.ending = fault.kind === 'malformed' ? 'malformed' : 'told'
    if (fault.kind === 'malformed' || !device) {
      log.info({ device: device?.username, fault: fault.kind }, 'A connection was closed for what it sent')
    } else onRefused({ device, ...tooLarge(fault, chunk, limits.maxPacketBytes) })
  }

  function end(connection: Connection, ending: Ending): void {
    connection.ending = ending
    connection.gate.cut()
  }

  /** Once each: under identifier 0 nothing can be acknowledged, and at QoS 2 a message comes again before its PUBREL. */
  async function publish(
    client: Client,
    connection: Connection | undefined,
    packet: PublishPacket,
    done: Answer,
  ): Promise<void> {
    const { qos, messageId } = packet
    const fault = qos > 0 && !messageId ? new Error('packet identifier 0') : null
    if (!fault && !(qos === 2 && (await sessions.isTaken(client, messageId)))) {
      intake.publish(connection, packet, done)
      return
    }
    connection?.gate.finished()
    done(fault)
  }

  /** [MQTT-3.1.4-2]: the library closes the one that was there. */
  function announceTakeover({ device, sessionId }: Connection): void {
    for (const other of device ? presence.of(device.deviceId) : []) {
      if (other.sessionId === sessionId) other.ending = 'taken-over'
    }
  }

  /**
   * A line that was lost is given up long after its device has come back under another client id; its last will must
   * not be the last word, when the device has said since that it is there.
   */
  function correctStatus({ device, statusTopic }: Connection, topic: string): void {
    const others = device ? presence.of(device.deviceId) : []
    if (topic !== statusTopic || !others.some(({ toldStatus }) => toldStatus === 'online')) return
    aedes.publish(
      { cmd: 'publish', topic, payload: 'online', qos: 1, retain: true, dup: false },
      () => undefined,
    )
  }

  function tellEnding(connection: Connection, error: Error | null): void {
    const trouble = stopping ? undefined : troubleOf(connection, error, limits)
    if (trouble) options.onTrouble?.(trouble)
  }

  /** Begins where there was no more room the last time, so that all get their turn. */
  function pumpAll(): void {
    const all = [...connections]
    const from = turn
    let full = false
    for (let count = 0; count < all.length; count++) {
      const next = (from + count) % all.length
      all[next]?.gate.pump()
      if (full || !(pressed.all || pressed.large)) continue
      full = true
      turn = next + 1
    }
  }

  /** [MQTT-3.1.2-24]: a client that is not heard for one and a half keep-alive times is disconnected. */
  function countSilence(): void {
    for (const connection of connections) {
      // Counted in ticks, not read from a clock: a process that was held up has not listened meanwhile.
      const silentMs = connection.gate.countSilence(tickMs)
      if (silentMs > 1.5 * patienceWith(connection, limits)) end(connection, 'silent')
    }
  }

  return {
    port,
    clients: presence.count,
    press: (on, what = 'all') => {
      pressed[what] = on
      if (!on) pumpAll()
    },
    handle,
    connections: presence.all,
    endSecrets: (secretIds) => {
      for (const connection of connections) {
        const secretId = connection.device?.secretId
        if (secretId !== undefined && secretIds.has(secretId)) end(connection, 'secret-ended')
      }
    },
    stop: async (deadlineMs = 10_000) => {
      if (stopping) return
      stopping = true
      const closed = new Promise<void>((resolve) => server.close(() => resolve()))
      await intake.settled(deadlineMs)
      // The last acknowledgements are written in the turns that follow.
      await new Promise((resolve) => setTimeout(resolve, 20))
      clearInterval(ticking)
      turns.stop()
      await new Promise<void>((resolve) => aedes.close(resolve))
      for (const { gate } of connections) gate.stream.destroy()
      await closed
    },
  }
}
