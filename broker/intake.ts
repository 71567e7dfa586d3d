import type { PublishPacket } from 'aedes'
import type { Connection } from './connection.ts'
import type { DeviceMessage, DeviceStatus, Refusal, SignedInDevice } from './device.ts'
import type { Gate } from './gate.ts'

export interface IntakeDeps {
  accept: (message: DeviceMessage) => Promise<unknown>
  onRefused: (refusal: Refusal) => void
  onStatus: (device: SignedInDevice, status: DeviceStatus) => void
}

/** Lets a PUBLISH pass, or with an error closes its connection. */
export type Answer = (error?: Error | null) => void

export interface Intake {
  /** A PUBLISH came through a connection's gate. Answered once what it brings is stored. */
  publish: (connection: Connection | undefined, packet: PublishPacket, done: Answer) => void
  /** A last will is published in the name of a connection that is gone. */
  will: (connection: Connection | undefined, packet: PublishPacket, done: Answer) => void
  /** Resolves when everything that was taken is stored, or when the time is over. */
  settled: (deadlineMs: number) => Promise<void>
}

/** Decides about what devices publish: readings go on to be stored, a status is told, the rest is refused. */
export function createIntake({ accept, onRefused, onStatus }: IntakeDeps): Intake {
  let unsettled = 0
  let onSettled: (() => void) | undefined

  function take(
    connection: Connection | undefined,
    packet: PublishPacket,
    gate: Gate | undefined,
    done: Answer,
  ): void {
    if (connection?.device && packet.topic === connection.readingsTopic) {
      takeReadings(connection.device, packet, gate, done)
      return
    }
    gate?.finished()
    if (!connection?.device) {
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

  function takeReadings(
    device: SignedInDevice,
    packet: PublishPacket,
    gate: Gate | undefined,
    done: Answer,
  ): void {
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

  return {
    publish: (connection, packet, done) => take(connection, packet, connection?.gate, done),
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

function asBuffer(payload: Buffer | string): Buffer {
  return typeof payload === 'string' ? Buffer.from(payload) : payload
}
