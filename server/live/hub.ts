import { randomUUID } from 'node:crypto'
import type { Logger } from 'pino'
import { WebSocket, WebSocketServer, type RawData } from 'ws'
import { ClientMessage, closeCodes, type ServerMessage } from '#shared/contract/live.ts'
import type { Tonight } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { Person } from '../http/mount.ts'
import { turnAway, type UpgradeHandler } from '../http/upgrades.ts'
import type { LiveBus } from './bus.ts'
import { createRoom, type Member, type Room } from './room.ts'

export interface LiveHubOptions {
  bus: LiveBus
  /** The person of a ticket, which is then used up. */
  verifyTicket: (ticket: string) => Promise<Person | undefined> | Person | undefined
  snapshotOf: (siteSlug: string) => Promise<Tonight>
  /** Whether a person may look into a site's room, as things stand now. */
  mayView: (person: Person, siteSlug: string) => Promise<boolean> | boolean
  /** Real time. */
  clock: Clock
  log: Logger
  limits?: Partial<LiveLimits>
}

export interface LiveLimits {
  helloMs: number
  heartbeatMs: number
  frameMs: number
  maxWaitingBytes: number
  maxBehindMs: number
  /** Messages that a client may send in a heartbeat's time. */
  maxMessages: number
  maxConnections: number
}

export interface LiveHub {
  connections: () => number
  /** Answers a request for the WebSocket. */
  upgrade: UpgradeHandler
  /** Tells everyone to come back later, and closes. */
  stop: () => Promise<void>
}

const defaultLimits: LiveLimits = {
  helloMs: 5_000,
  heartbeatMs: 25_000,
  frameMs: 100,
  maxWaitingBytes: 256 * 1024,
  maxBehindMs: 30_000,
  maxMessages: 200,
  maxConnections: 5_000,
}

/** Close codes of RFC 6455, section 7.4.1. */
const standardCodes = { goingAway: 1001, policy: 1008, tryAgain: 1013 } as const

/** What is known of one socket. */
interface Visitor {
  socket: WebSocket
  person: Person | undefined
  rooms: Map<string, Member>
  alive: boolean
  messages: number
  /** Whether anybody can see it. */
  visible: boolean
  /** Done when every message so far has been answered. */
  heard: Promise<void>
}

/** The WebSocket side of the product: tickets at the door, one room a site, one frame a tick. */
export function createLiveHub(options: LiveHubOptions): LiveHub {
  const { bus, clock, log } = options
  const limits = { ...defaultLimits, ...options.limits }
  const epoch = randomUUID()
  const rooms = new Map<string, Room>()
  const visitors = new Set<Visitor>()
  const sockets = new WebSocketServer({ noServer: true, perMessageDeflate: false, maxPayload: 4 * 1024 })

  const unsubscribe = bus.subscribe((site, changes) => rooms.get(site)?.add(changes))
  const heartbeat = setInterval(() => void beat(), limits.heartbeatMs)

  const upgrade: UpgradeHandler = (request, socket, head) => {
    if (visitors.size >= limits.maxConnections) turnAway(socket, '503 Service Unavailable')
    else sockets.handleUpgrade(request, socket, head, greet)
  }

  function greet(socket: WebSocket): void {
    const visitor: Visitor = {
      socket,
      person: undefined,
      rooms: new Map(),
      alive: true,
      messages: 0,
      visible: true,
      heard: Promise.resolve(),
    }
    visitors.add(visitor)
    const patience = setTimeout(() => {
      if (!visitor.person) socket.close(closeCodes.notSignedIn, 'Say hello with a ticket first.')
    }, limits.helloMs)
    socket.on('message', (data, isBinary) => {
      // One after the other: a hello still being looked at must not be overtaken.
      visitor.heard = visitor.heard
        .then(() => hear(visitor, data, isBinary))
        .catch((error: unknown) => {
          log.error({ err: error }, 'A live message could not be answered')
          socket.close(standardCodes.tryAgain, 'Try again.')
        })
    })
    socket.on('pong', () => {
      visitor.alive = true
    })
    socket.on('error', (error) => log.debug({ reason: error.message }, 'A live socket failed'))
    socket.on('close', () => {
      clearTimeout(patience)
      visitors.delete(visitor)
      for (const [site, member] of visitor.rooms) rooms.get(site)?.leave(member)
      visitor.rooms.clear()
    })
  }

  async function hear(visitor: Visitor, data: RawData, isBinary: boolean): Promise<void> {
    const message = isBinary || ++visitor.messages > limits.maxMessages ? undefined : readMessage(data)
    if (!message) {
      visitor.socket.close(standardCodes.policy, 'That message is not one of this protocol.')
      return
    }
    if (message.type === 'hello') await signIn(visitor, message.ticket)
    else if (!visitor.person) visitor.socket.close(closeCodes.notSignedIn, 'Say hello with a ticket first.')
    else if (message.type === 'subscribe') await join(visitor, visitor.person, message.site)
    else if (message.type === 'unsubscribe') leave(visitor, message.site)
    else if (message.type === 'attention') attend(visitor, message.visible)
    else refresh(visitor, message.site)
  }

  async function signIn(visitor: Visitor, ticket: string): Promise<void> {
    const person = visitor.person ? undefined : await options.verifyTicket(ticket)
    if (!person) {
      visitor.socket.close(closeCodes.notSignedIn, 'That ticket is not good, or not any more.')
      return
    }
    visitor.person = person
    tell(visitor, { type: 'welcome', epoch })
  }

  async function join(visitor: Visitor, person: Person, site: string): Promise<void> {
    if (visitor.rooms.has(site)) {
      refresh(visitor, site)
      return
    }
    if (!(await options.mayView(person, site))) {
      tell(visitor, { type: 'refused', site, reason: 'You may not see that site, or it is not there.' })
      return
    }
    if (visitor.socket.readyState !== WebSocket.OPEN || visitor.rooms.has(site)) return
    const member = memberOf(visitor.socket)
    visitor.rooms.set(site, member)
    roomOf(site).join(member)
    if (!visitor.visible) roomOf(site).attend(member, false)
  }

  function attend(visitor: Visitor, visible: boolean): void {
    visitor.visible = visible
    for (const [site, member] of visitor.rooms) rooms.get(site)?.attend(member, visible)
  }

  function leave(visitor: Visitor, site: string): void {
    const member = visitor.rooms.get(site)
    if (!member) return
    visitor.rooms.delete(site)
    rooms.get(site)?.leave(member)
  }

  function refresh(visitor: Visitor, site: string): void {
    const member = visitor.rooms.get(site)
    if (member) rooms.get(site)?.refresh(member)
    else tell(visitor, { type: 'refused', site, reason: 'Subscribe to the site first.' })
  }

  function roomOf(site: string): Room {
    const known = rooms.get(site)
    if (known) return known
    const room = createRoom({
      site,
      epoch,
      clock,
      snapshotOf: options.snapshotOf,
      frameMs: limits.frameMs,
      maxWaitingBytes: limits.maxWaitingBytes,
      maxBehindMs: limits.maxBehindMs,
      onError: (error) => log.warn({ err: error, site }, 'A snapshot could not be read'),
    })
    rooms.set(site, room)
    return room
  }

  /** Pings everyone, gives up those that have not answered, and asks again who may see what. */
  async function beat(): Promise<void> {
    for (const visitor of visitors) {
      visitor.messages = 0
      if (!visitor.alive) {
        visitor.socket.terminate()
        continue
      }
      visitor.alive = false
      visitor.socket.ping()
    }
    for (const visitor of [...visitors]) await checkRooms(visitor)
  }

  /** Roles change while sockets stay open for weeks. */
  async function checkRooms(visitor: Visitor): Promise<void> {
    for (const site of [...visitor.rooms.keys()]) {
      try {
        if (!visitor.person || (await options.mayView(visitor.person, site))) continue
      } catch {
        // Not known just now: things stay as they are until the next beat.
        continue
      }
      leave(visitor, site)
      tell(visitor, { type: 'refused', site, reason: 'You may not see that site any more.' })
    }
  }

  return {
    connections: () => visitors.size,
    upgrade,
    stop: async () => {
      clearInterval(heartbeat)
      unsubscribe()
      const closed = [...visitors].map(({ socket }) => closeWell(socket))
      await Promise.all(closed)
      for (const room of rooms.values()) room.close()
      sockets.close()
    },
  }
}

function memberOf(socket: WebSocket): Member {
  return {
    send: (text) => {
      if (socket.readyState === WebSocket.OPEN) socket.send(text)
    },
    waitingBytes: () => socket.bufferedAmount,
    onTooSlow: () => {
      socket.close(closeCodes.tooSlow, 'This connection is too slow.')
      // Whoever does not read does not read the closing either.
      setTimeout(() => socket.terminate(), 2_000).unref()
    },
    onNoSnapshot: () => socket.close(standardCodes.tryAgain, 'The state cannot be read just now. Try again.'),
  }
}

function tell({ socket }: Visitor, message: ServerMessage): void {
  if (socket.readyState === WebSocket.OPEN) socket.send(JSON.stringify(message))
}

function readMessage(data: RawData): ClientMessage | undefined {
  try {
    const bytes = Array.isArray(data) ? Buffer.concat(data) : Buffer.from(new Uint8Array(data))
    return ClientMessage.safeParse(JSON.parse(bytes.toString())).data
  } catch {
    return undefined
  }
}

/** Says that the server goes, and does not wait long for the answer. */
function closeWell(socket: WebSocket): Promise<void> {
  return new Promise((resolve) => {
    const deadline = setTimeout(() => socket.terminate(), 1_000)
    socket.once('close', () => {
      clearTimeout(deadline)
      resolve()
    })
    if (socket.readyState === WebSocket.CLOSED) resolve()
    else socket.close(standardCodes.goingAway, 'The server is stopping.')
  })
}
