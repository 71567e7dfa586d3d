import { Readable } from 'node:stream'
import type { Client, Subscription } from 'aedes'

export interface SessionStoreOptions {
  /** Sessions that are kept for a device while nobody is connected to them. */
  maxKeptSessions: number
  /** Messages, and their bytes, that wait for one session. */
  maxWaiting: number
  maxWaitingBytes: number
  /** What a client's own topics begin with, up to and with the last slash; undefined before it has signed in. */
  prefixOf: (client: Client) => string | undefined
  isConnected: (clientId: string) => boolean
}

/** What the library knows a message by before it has an identifier. */
interface Named {
  messageId?: number | undefined
  brokerId?: string | undefined
  brokerCounter?: number | undefined
}
interface Message extends Named {
  cmd: 'publish'
  topic: string
  payload: string | Buffer
  retain?: boolean
  dup?: boolean
}
/** A message on its way to a session, or the PUBREL that has taken its place [MQTT-4.3.3-1]. */
type Outgoing = Message | (Named & { cmd: 'pubrel' })

/** What is kept of a client beyond its connection (MQTT 3.1.1, section 3.1.2.4). */
interface Session {
  prefix: string
  filters: Map<string, Subscription>
  waiting: Outgoing[]
  waitingBytes: number
  /** Identifiers of messages at QoS 2 that were taken and not released yet. */
  taken: Set<number>
}

type WithId = Pick<Client, 'id'>

/**
 * Sessions and retained messages in memory: what the broker's library calls its persistence, with a bound on each part.
 * It holds only what a device may have, its own topics, so that a message finds its sessions by the topic's beginning.
 */
export function createSessionStore(options: SessionStoreOptions) {
  const sessions = new Map<string, Session>()
  /** Client ids by what their topics begin with, the oldest first. */
  const byPrefix = new Map<string, Set<string>>()
  const retained = new Map<string, Message>()

  function sessionFor(client: Client): Session | undefined {
    const known = sessions.get(client.id)
    if (known) return known
    const prefix = options.prefixOf(client)
    if (prefix === undefined) return undefined
    const ofDevice = byPrefix.get(prefix) ?? new Set()
    byPrefix.set(prefix, ofDevice)
    if (ofDevice.size >= options.maxKeptSessions) {
      const oldest = [...ofDevice].find((id) => !options.isConnected(id))
      if (oldest !== undefined) forget(oldest)
    }
    const session = { prefix, filters: new Map(), waiting: [], waitingBytes: 0, taken: new Set<number>() }
    sessions.set(client.id, session)
    byPrefix.set(prefix, ofDevice.add(client.id))
    return session
  }

  function forget(clientId: string): void {
    const session = sessions.get(clientId)
    if (!session) return
    sessions.delete(clientId)
    const ofDevice = byPrefix.get(session.prefix)
    ofDevice?.delete(clientId)
    if (ofDevice?.size === 0) byPrefix.delete(session.prefix)
  }

  function forgetIfEmpty(clientId: string): void {
    const session = sessions.get(clientId)
    if (session?.filters.size === 0 && session.waiting.length === 0 && session.taken.size === 0) {
      forget(clientId)
    }
  }

  function enqueue(clientId: string, packet: Message): void {
    const session = sessions.get(clientId)
    if (!session) return
    const bytes = packet.payload.length
    if (session.waiting.length >= options.maxWaiting) return
    if (session.waitingBytes + bytes > options.maxWaitingBytes) return
    // [MQTT-3.3.1-9]: to a subscriber the retain flag is 0, now or later.
    session.waiting.push({ ...packet, retain: false, dup: false, messageId: undefined })
    session.waitingBytes += bytes
  }

  return {
    /** The library insists on an async function. */
    async setup() {
      await Promise.resolve()
    },

    storeRetained: soon((packet: Message) => {
      if (packet.payload.length === 0) retained.delete(packet.topic)
      else retained.set(packet.topic, { ...packet })
    }),

    /** Retained are statuses only. */
    createRetainedStreamCombi(filters: readonly string[]) {
      const topics = new Set(filters.map((filter) => `${prefixOf(filter)}status`))
      const wanted = [...topics].filter((topic) => filters.some((filter) => matches(filter, topic)))
      return Readable.from(wanted.flatMap((topic) => retained.get(topic) ?? []))
    },

    addSubscriptions: soon((client: Client, subscriptions: readonly Subscription[]) => {
      const session = sessionFor(client)
      // The library hands over those that were refused as well.
      for (const subscription of subscriptions) {
        if (session && prefixOf(subscription.topic) === session.prefix) {
          session.filters.set(subscription.topic, { topic: subscription.topic, qos: subscription.qos })
        }
      }
    }),

    removeSubscriptions: soon((client: WithId, filters: readonly string[]) => {
      for (const filter of filters) sessions.get(client.id)?.filters.delete(filter)
      forgetIfEmpty(client.id)
    }),

    subscriptionsByClient: soon((client: WithId) => {
      return [...(sessions.get(client.id)?.filters.values() ?? [])].map((each) => ({ ...each }))
    }),

    /** A clean session begins: nothing is left of the one before [MQTT-3.1.2-6]. */
    cleanSubscriptions: soon((client: WithId) => {
      forget(client.id)
    }),

    subscriptionsByTopic: soon((topic: string) => {
      const found: (Subscription & { clientId: string })[] = []
      for (const clientId of byPrefix.get(prefixOf(topic)) ?? []) {
        for (const subscription of sessions.get(clientId)?.filters.values() ?? []) {
          if (subscription.qos > 0 && matches(subscription.topic, topic)) {
            found.push({ ...subscription, clientId })
          }
        }
      }
      return found
    }),

    outgoingEnqueue: soon(({ clientId }: { clientId: string }, packet: Message) => {
      enqueue(clientId, packet)
    }),

    outgoingEnqueueCombi: soon((subscriptions: readonly { clientId: string }[], packet: Message) => {
      for (const { clientId } of subscriptions) enqueue(clientId, packet)
    }),

    /** Gives a message its identifier, or puts a PUBREL in its place. Throws when it is not there. */
    outgoingUpdate: soon((client: WithId, packet: Outgoing) => {
      const waiting = sessions.get(client.id)?.waiting ?? []
      for (const [at, one] of waiting.entries()) {
        if (one.brokerId === packet.brokerId) {
          if (one.brokerCounter !== packet.brokerCounter) continue
          one.messageId = packet.messageId
          return
        }
        if (one.messageId === packet.messageId) {
          waiting[at] = packet
          return
        }
      }
      throw new Error('That message does not wait any more.')
    }),

    outgoingClearMessageId: soon((client: WithId, { messageId }: { messageId?: number }) => {
      const session = sessions.get(client.id)
      const at = session?.waiting.findIndex((one) => one.messageId === messageId) ?? -1
      if (!session || at < 0) return undefined
      const [packet] = session.waiting.splice(at, 1)
      if (packet?.cmd === 'publish') session.waitingBytes -= packet.payload.length
      return packet
    }),

    outgoingStream(client: WithId) {
      const waiting = sessions.get(client.id)?.waiting ?? []
      // [MQTT-3.3.1-1]: what has been sent before comes again with DUP.
      return Readable.from(
        waiting.map((one) => (one.cmd === 'publish' && one.messageId ? { ...one, dup: true } : one)),
      )
    },

    /** Whether a message at QoS 2 under this identifier was taken and waits for its PUBREL. */
    isTaken: soon((client: WithId, messageId: number | undefined) => {
      return messageId !== undefined && sessions.get(client.id)?.taken.has(messageId) === true
    }),

    incomingStorePacket: soon((client: Client, { messageId }: { messageId?: number }) => {
      if (messageId !== undefined) sessionFor(client)?.taken.add(messageId)
    }),

    incomingGetPacket: soon((client: WithId, { messageId }: { messageId?: number }) => {
      if (messageId === undefined || !sessions.get(client.id)?.taken.has(messageId)) {
        throw new Error('No message with that identifier was taken.')
      }
      return { messageId }
    }),

    incomingDelPacket: soon((client: WithId, { messageId }: { messageId?: number }) => {
      if (messageId !== undefined) sessions.get(client.id)?.taken.delete(messageId)
      forgetIfEmpty(client.id)
    }),

    cleanIncoming: soon((client: WithId) => {
      sessions.get(client.id)?.taken.clear()
      forgetIfEmpty(client.id)
    }),

    /** Wills are with their connections; nothing here outlives the process. */
    putWill: soon(() => {
      // Nothing.
    }),
    delWill: soon(() => {
      // Nothing.
    }),
    streamWill() {
      return Readable.from([])
    },
  }
}

/** The library waits for each answer, also for an error. */
function soon<Arguments extends unknown[], Result>(
  work: (...given: Arguments) => Result,
): (...given: Arguments) => Promise<Result> {
  return (...given) => new Promise((resolve) => resolve(work(...given)))
}

function prefixOf(topic: string): string {
  return topic.slice(0, topic.lastIndexOf('/') + 1)
}

/** A filter of a device ends in a leaf or in a wildcard for its leaves; nothing else is let in. */
function matches(filter: string, topic: string): boolean {
  if (filter === topic) return true
  const last = filter.at(-1)
  return (last === '#' || last === '+') && prefixOf(filter) === prefixOf(topic)
}
