import type { IngestOutcome } from '#shared/contract/reading.ts'
import type { z } from 'zod'
import type { Decoded, NewReading, Refused } from './decode.ts'
import type { Sender } from './known-device.ts'

export type Outcome = z.infer<typeof IngestOutcome>

/** Where and when a message came from. */
export interface Received {
  sender: Sender
  topic: string
  receivedAtMs: number
  /** Monotonic, in ms: for the delay. */
  acceptedAt: number
}

/** One message on its way into the database. */
export interface Job extends Received {
  readings: readonly NewReading[]
  refused: readonly Refused[]
  batteryPercent: number | undefined
  signalDbm: number | undefined
  /** How many of the readings have been handed to a batch. */
  taken: number
  outcome: Outcome
  resolve: (outcome: Outcome) => void
  reject: (error: Error) => void
}

/** Makes a job and the promise of its outcome. */
export function createJob(
  message: Received,
  decoded: Pick<Decoded, 'readings' | 'refused' | 'batteryPercent' | 'signalDbm'>,
): { job: Job; outcome: Promise<Outcome> } {
  const job: Job = {
    sender: message.sender,
    topic: message.topic,
    receivedAtMs: message.receivedAtMs,
    acceptedAt: message.acceptedAt,
    readings: decoded.readings,
    refused: decoded.refused,
    batteryPercent: decoded.batteryPercent,
    signalDbm: decoded.signalDbm,
    taken: 0,
    outcome: {
      stored: 0,
      duplicates: 0,
      rejected: decoded.refused.map(({ reason, detail }) => ({ reason, detail })),
    },
    resolve: nothing,
    reject: nothing,
  }
  const outcome = new Promise<Outcome>((resolve, reject) => {
    job.resolve = resolve
    job.reject = reject
  })
  return { job, outcome }
}

function nothing(): void {
  // Replaced before anyone can call it.
}
