import type { PublishPacket } from 'aedes'
import type { Connection } from './connection.ts'
import type { DeviceMessage, Refusal, SignedInDevice } from './device.ts'
import type { Gate } from './gate.ts'
import type { BrokerLimits } from './limits.ts'

export interface IntakeDeps {
  accept: (message: DeviceMessage) => Promise<unknown>
  onRefused: (refusal: Refusal) => void
  limits: Pick<BrokerLimits, 'maxKeptBytes'>
}

/** Lets a PUBLISH pass, or with an error closes its connection. */
export type Answer = (error?: Error | null) => void

export interface Intake {
  /** A PUBLISH came through a connection's gate. Answered once what it brings is stored. */
  publish: (connection: Connection | undefined, packet: PublishPacket, done: Answer) => void
  /** Readings that need not go through the library. Answered once they are stored, also at QoS 0. */
  readings: (message: DeviceMessage, done: Answer) => void
  /** A last will is published in the name of a connection that is gone. */
  will: (connection: Connection | undefined, packet: PublishPacket, done: Answer) => void
  /** Resolves when everything that was taken is stored, or when the time is over. */
  settled: (deadlineMs: number) => Promise<void>
}

/** Decides about what devices publish: readings go on to be stored, a status is told, the rest is refused. */
export function createIntake({ accept, onRefused, limits }: IntakeDeps): Intake {
  let unsettled = 0
  let onSettled: (() => void) | undefined

  function take(
    connection: Connection | undefined,
    packet: PublishPacket,
    gate: Gate | undefined,
    done: Answer,
  ): void {
    if (connection?.device && packet.topic === connection.readingsTopic) {
      // Readings are in the database; kept here too they would only take the place of what may be kept.
      packet.retain = false
      takeReadings(connection, connection.device, packet, gate, done)
      return
    }
    gate?.finished()
    if (!connection?.device) {
      done(new Error('not connected'))
    } else if (packet.topic === connection.statusTopic) {
      const status = asBuffer(packet.payload)
      if (status.length > limits.maxKeptBytes) {
        const detail = `a status of ${status.length} bytes; at most ${limits.maxKeptBytes} are kept`
        refuse(connection, connection.device, packet, { reason: 'too-large', detail }, done)
        return
      }
      const word = status.toString()
      if (word === 'online' || word === 'offline') connection.toldStatus = word
      done(null)
    } else {
      const detail = `it may publish to ${connection.readingsTopic} and ${connection.statusTopic} only`
      refuse(connection, connection.device, packet, { reason: 'foreign-topic', detail }, done)
    }
  }

  function refuse(
    connection: Connection,
    device: SignedInDevice,
    packet: PublishPacket,
    why: Pick<Refusal, 'reason' | 'detail'>,
    done: Answer,
  ): void {
    connection.ending = 'told'
    const payload = asBuffer(packet.payload).subarray(0, beginningBytes)
    onRefused({ device, topic: packet.topic, payload, ...why })
    done(new Error(why.detail))
  }

  function takeReadings(
    connection: Connection,
    device: SignedInDevice,
    packet: PublishPacket,
    gate: Gate | undefined,
    done: Answer,
  ): void {
    // At QoS 0 nobody waits for an answer; the gate still counts it until it is stored.
    const answer = packet.qos > 0 ? done : undefined
    store({ device, topic: packet.topic, payload: asBuffer(packet.payload) }, (error) => {
      gate?.finished()
      // The fault is ours: it comes back and sends again.
      if (error && answer) connection.ending ??= 'told'
      answer?.(error)
    })
    if (!answer) done(null)
  }

  function store(message: DeviceMessage, answer: Answer): void {
    unsettled++
    accept(message).then(
      () => settle(answer, null),
      (error: unknown) => settle(answer, error instanceof Error ? error : new Error(String(error))),
    )
  }

  function settle(answer: Answer, error: Error | null): void {
    answer(error)
    if (--unsettled === 0) onSettled?.()
  }

  return {
    publish: (connection, packet, done) => take(connection, packet, connection?.gate, done),
    readings: store,
    will: (connection, packet, done) => take(connection, packet, undefined, done),
    settled: async (deadlineMs) => {
      if (unsettled === 0) return
      let timer: NodeJS.Timeout | undefined
      await new Promise<void>((resolve) => {
        onSettled = resolve
        timer = setTimeout(resolve, deadlineMs)
      })
      clearTimeout(timer)
    },
  }
}

/** Of a payload that was refused, what is told. */
const beginningBytes = 1000

function asBuffer(payload: Buffer | string): Buffer {
  return typeof payload === 'string' ? Buffer.from(payload) : payload
}
