import { connect, type Socket } from 'node:net'
import { generate } from 'mqtt-packet'
import type { Random } from '#shared/domain/random.ts'
import { acknowledgements } from './acknowledgements.ts'
import { messageCount, payloadOf, type BoxPlan } from './plan.ts'

/** What a box has to tell of itself. */
export interface BoxCounts {
  /** Messages that fell due, were sent at least once, and were acknowledged. */
  due: number
  sent: number
  acknowledged: number
  /** Messages sent once more after a connection was lost. */
  sentAgain: number
  connected: boolean
  /** Connections lost, and tries that were turned away. */
  lost: number
  turnedAway: number
  /** PUBACKs that came before one of an earlier message on the same connection. */
  overtaken: number
  pings: number
  /** The longest wait for a PINGRESP, in ms, a running one included. */
  longestPingMs: number
}

export interface Box {
  counts: () => BoxCounts
  /** Looks what has fallen due. @param nowMs milliseconds since 1970 UTC */
  tick: (nowMs: number) => void
  /** Nothing more falls due; what has is still sent. */
  stopSampling: () => void
  isDone: () => boolean
  /** Messages not yet acknowledged, with the time each fell due (monotonic, in ms). */
  waiting: () => Iterable<number>
  close: () => void
}

interface Message {
  number: number
  dueAt: number
}

/**
 * A probe box over TCP: QoS 1, a kept session, at most `window` messages on the way. After a lost connection it comes
 * back and first sends again, in order and with DUP, what was not acknowledged [MQTT-4.4.0-1].
 */
export function createBox(
  { port, plan, random }: { port: number; plan: BoxPlan; random: Random },
  onAcknowledged: (dueAt: number) => void,
): Box {
  const total = messageCount(plan)
  const queue: Message[] = []
  const onTheWay = new Map<number, Message>()
  const counts = {
    due: 0,
    sent: 0,
    acknowledged: 0,
    sentAgain: 0,
    lost: 0,
    turnedAway: 0,
    overtaken: 0,
    pings: 0,
  }
  let longestPingMs = 0
  let pingedAt: number | undefined
  let lastSentAt = 0
  let lastNumber = -1
  let packetId = 0
  let socket: Socket | undefined
  let connected = false
  let sampling = true
  let closed = false
  let timer: NodeJS.Timeout | undefined
  open()

  function open(): void {
    const own = connect({ port, host: '127.0.0.1', noDelay: true })
    socket = own
    const read = acknowledgements({
      onConnack: (code) => (code === 0 ? greet() : turnAway()),
      onPuback: acknowledge,
      onPong: () => {
        notePing()
        pingedAt = undefined
      },
    })
    own.on('connect', () => {
      own.write(
        generate({
          cmd: 'connect',
          protocolId: 'MQTT',
          protocolVersion: 4,
          clean: false,
          clientId: plan.clientId,
          keepalive: plan.keepAliveS,
          username: plan.username,
          password: Buffer.from(plan.secret),
        }),
      )
    })
    own.on('data', read)
    own.on('error', () => undefined)
    own.on('close', () => {
      if (socket !== own) return
      if (connected) counts.lost++
      connected = false
      notePing()
      pingedAt = undefined
      if (closed) return
      timer = setTimeout(open, plan.reconnectMs * (1 + random.uniform() / 2))
    })

    function turnAway(): void {
      counts.turnedAway++
      own.destroy()
    }
  }

  function greet(): void {
    connected = true
    lastNumber = -1
    for (const [id, message] of onTheWay) {
      counts.sentAgain++
      write(id, message, true)
    }
    send()
  }

  function acknowledge(id: number): void {
    const message = onTheWay.get(id)
    if (!message) return
    onTheWay.delete(id)
    counts.acknowledged++
    if (message.number < lastNumber) counts.overtaken++
    lastNumber = Math.max(lastNumber, message.number)
    onAcknowledged(message.dueAt)
    send()
  }

  function tick(nowMs: number): void {
    const present = performance.now()
    if (sampling && counts.due < total) {
      const due =
        plan.samples === null
          ? Math.floor((nowMs - plan.startMs) / plan.periodMs / plan.samplesPerMessage)
          : total
      while (counts.due < due) queue.push({ number: counts.due++, dueAt: present })
      send()
    }
    if (connected && plan.keepAliveS > 0 && present - lastSentAt > plan.keepAliveS * 500) ping(present)
    notePing()
  }

  function send(): void {
    if (!connected || !socket) return
    // One write for all that goes: a box sends its packets back to back.
    socket.cork()
    while (onTheWay.size < plan.window) {
      const message = queue.shift()
      if (!message) break
      const id = freeId()
      onTheWay.set(id, message)
      counts.sent++
      write(id, message, false)
    }
    socket.uncork()
  }

  function write(messageId: number, { number }: Message, dup: boolean): void {
    const payload = payloadOf(plan, number)
    socket?.write(
      generate({ cmd: 'publish', topic: plan.topic, payload, qos: 1, messageId, dup, retain: false }),
    )
  }

  function freeId(): number {
    do packetId = (packetId % 65_535) + 1
    while (onTheWay.has(packetId))
    return packetId
  }

  /** Also while it publishes: that the server answers is what the box goes by. */
  function ping(present: number): void {
    lastSentAt = present
    counts.pings++
    pingedAt ??= present
    socket?.write(Buffer.from([0xc0, 0]))
  }

  function notePing(): void {
    if (pingedAt !== undefined) longestPingMs = Math.max(longestPingMs, performance.now() - pingedAt)
  }

  return {
    counts: () => ({ ...counts, connected, longestPingMs }),
    tick,
    stopSampling: () => {
      sampling = false
    },
    isDone: () => queue.length === 0 && onTheWay.size === 0 && (!sampling || counts.due >= total),
    waiting: function* () {
      for (const { dueAt } of onTheWay.values()) yield dueAt
      for (const { dueAt } of queue) yield dueAt
    },
    close: () => {
      closed = true
      clearTimeout(timer)
      socket?.end(Buffer.from([0xe0, 0]))
    },
  }
}
