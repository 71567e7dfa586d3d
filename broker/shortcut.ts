import { createAcknowledgements } from './acknowledgements.ts'
import type { Connection } from './connection.ts'
import type { Intake } from './intake.ts'
import { readPlainPublish, type PlainPublish } from './plain-publish.ts'

/** The way of readings past the broker's library, which has nothing to do for them as long as nobody listens. */
export interface Shortcut {
  /** What a packet brings, if it may go this way. */
  read: (bytes: Buffer, from: number, end: number) => PlainPublish | undefined
  /** Takes it in; `finished` is called when it is stored or was given up. */
  take: (publish: PlainPublish, finished: () => void) => void
  /** Messages on this way that are not acknowledged yet. */
  waiting: () => number
}

/**
 * Readings of a signed-in device under its own topic go straight to be stored and are acknowledged in their order:
 * the library would parse, match and copy each for subscribers that there are none of, and took four fifths of the
 * time. Everything else, and everything of a device that listens to its own topics, goes through the library.
 */
export function createShortcut({
  connection,
  intake,
  hasListeners,
}: {
  connection: () => Connection
  intake: Pick<Intake, 'readings'>
  /** Whether anybody may have subscribed to what a device publishes. */
  hasListeners: (deviceId: number) => boolean
}): Shortcut {
  let topic: Buffer | undefined
  const acknowledgements = createAcknowledgements((packets) => {
    const { gate } = connection()
    if (gate.stream.destroyed) return
    gate.stream.write(packets)
    // What had to wait for these acknowledgements may go now.
    gate.pump()
  })

  return {
    read: (bytes, from, end) => {
      const { device, readingsTopic } = connection()
      if (!device || hasListeners(device.deviceId)) return undefined
      topic ??= Buffer.from(readingsTopic)
      return readPlainPublish(bytes, from, end, topic)
    },
    take: ({ messageId, payload }, finished) => {
      const { device, readingsTopic, gate } = connection()
      if (!device) return
      const acknowledge = messageId === 0 ? undefined : acknowledgements.expect(messageId)
      intake.readings({ device, topic: readingsTopic, payload }, (error) => {
        finished()
        if (!error) acknowledge?.()
        // As the library does: the device comes back and sends again what was not acknowledged.
        else if (acknowledge) {
          connection().ending ??= 'told'
          gate.cut()
        }
      })
    },
    waiting: acknowledgements.waiting,
  }
}
