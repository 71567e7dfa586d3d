import { performance } from 'node:perf_hooks'
import type { RejectionReason } from '#shared/contract/device.ts'
import type { SenmlRecord } from '#shared/contract/senml.ts'
import { commitBatch, type Committed } from './commit-batch.ts'
import { decodePack } from './decode.ts'
import { createDelayWindow } from './delay-window.ts'
import { hear, type Heard } from './heard.ts'
import { usualLimits, type IngestOptions } from './ingest-options.ts'
import { createJob, type Job, type Outcome, type Received } from './job.ts'
import type { Sender } from './known-device.ts'
import { createLargePacks } from './large-packs.ts'
import { createRetry } from './retry.ts'
import { createWaitingLine, type Batch } from './waiting-line.ts'

/** What a device sent: JSON as it came, or a pack that was parsed already. */
export interface IngestMessage {
  device: Sender
  topic: string
  payload: Buffer | readonly SenmlRecord[]
}

/** What the broker turned away by itself. */
export interface IngestRefusal {
  device: Sender
  topic: string
  reason: RejectionReason
  detail: string
  payload: Buffer
}

export interface IngestMetrics {
  /** Readings waiting for the database. */
  waiting: number
  /** From acceptance to commit over the last minute, in ms; null when nothing came. */
  delayMedianMs: number | null
  delayP99Ms: number | null
  /** Milliseconds since 1970 UTC; null until something was stored. */
  newestReadingMs: number | null
  /** Whether the last try to store something worked. */
  databaseOk: boolean
}

export interface Ingest {
  /** Resolves when everything in the message is committed, taken or rejected. Rejects: it must be sent again. */
  accept: (message: IngestMessage) => Promise<Outcome>
  /** Whether so much waits that nothing more should be brought. */
  isFull: () => boolean
  /** Records what the broker turned away. */
  refuse: (refusal: IngestRefusal) => Promise<Outcome>
  metrics: () => IngestMetrics
  /** Takes nothing more and waits until all is committed, up to the deadline. */
  stop: (deadlineMs?: number) => Promise<void>
}

/** Nothing can be taken in just now; the sender keeps what it has and tries again. */
export class IngestUnavailable extends Error {}

/** A record of a large pack, in bytes, about: for how much waits. */
const recordBytes = 30

/** A batch that takes so long waits for a database that does not answer, in ms. */
const slowMs = 5_000

/**
 * Takes readings in: decodes and checks each message at once, collects for a few milliseconds, commits with one insert
 * in flight, and only then lets the sender know. While the database is away messages wait, within a bound.
 */
export function createIngest(options: IngestOptions): Ingest {
  const { db, clock, channels, live, onHeard, onPressure, log } = options
  const limits = { ...usualLimits, ...options.limits }
  const line = createWaitingLine(limits)
  const delays = createDelayWindow()
  const large = createLargePacks(limits.maxLargeBytes, options.onLargePressure ?? (() => undefined))
  const retry = createRetry({ log, waiting })
  let newestMs: number | null = null
  let running: Promise<void> | undefined
  let runningSince = 0
  let timer: NodeJS.Timeout | undefined
  let pressed = false
  let stopping = false

  function accept({ device, topic, payload }: IngestMessage): Promise<Outcome> {
    const message = { sender: device, topic, receivedAtMs: clock.now(), acceptedAt: performance.now() }
    return Buffer.isBuffer(payload) && payload.length > limits.largeBytes
      ? acceptLater(message, payload)
      : acceptNow(message, payload)
  }

  function acceptLater(message: Received, payload: Buffer): Promise<Outcome> {
    if (stopping) return Promise.reject(new IngestUnavailable('The server is stopping.'))
    return new Promise((resolve, reject) => {
      const open = () => {
        acceptNow(message, payload).then(resolve, reject)
      }
      large.add({ bytes: payload.length, open, giveUp: reject })
      openLarge()
    })
  }

  function openLarge(): void {
    large.openWhile(() => line.size().readings < limits.maxRows)
  }

  function acceptNow(message: Received, payload: IngestMessage['payload']): Promise<Outcome> {
    const known = channels.known(message.sender.deviceId)
    const decoded = known && decodePack(payload, known, message.receivedAtMs)
    return decoded && !decoded.unknownChannel ? enqueue(message, decoded) : acceptUnknown(message, payload)
  }

  /** The device, or one of its channels, may have been added since it was last looked up. */
  async function acceptUnknown(message: Received, payload: IngestMessage['payload']): Promise<Outcome> {
    const known = await channels.load(message.sender.deviceId)
    return enqueue(message, decodePack(payload, known, message.receivedAtMs))
  }

  function refuse({ device, topic, reason, detail, payload }: IngestRefusal): Promise<Outcome> {
    const message = { sender: device, topic, receivedAtMs: clock.now(), acceptedAt: performance.now() }
    const refused = [{ reason, detail, record: payload.toString() }]
    return enqueue(message, { readings: [], refused, batteryPercent: undefined, signalDbm: undefined })
  }

  function enqueue(message: Received, decoded: Parameters<typeof createJob>[1]): Promise<Outcome> {
    if (stopping) return Promise.reject(new IngestUnavailable('The server is stopping.'))
    const { job, outcome } = createJob(message, decoded)
    line.add(job, message.acceptedAt)
    updatePressure()
    wake()
    return outcome
  }

  /** Starts the next batch when it is due; while one is in flight, its end does. */
  function wake(): void {
    if (running) return
    const since = line.waitingSince()
    if (since === undefined) return
    const waitMs =
      stopping || line.size().readings >= limits.maxRows ? 0 : since + limits.lingerMs - performance.now()
    if (waitMs <= 0) {
      clearTimeout(timer)
      timer = undefined
      runningSince = performance.now()
      running = work()
    } else {
      timer ??= setTimeout(() => {
        timer = undefined
        wake()
      }, waitMs)
    }
  }

  async function work(): Promise<void> {
    const batch = line.take()
    if (batch) {
      const committed = await commit(batch)
      next()
      // The database has its next batch; what follows from this one is done meanwhile.
      if (committed) settle(batch, committed)
    } else {
      next()
    }
  }

  function next(): void {
    running = undefined
    updatePressure()
    wake()
    // Decoded while the database is at work.
    openLarge()
  }

  /** @returns undefined when it was settled in parts */
  async function commit(batch: Batch): Promise<Committed | undefined> {
    try {
      return await retry.until(() => commitBatch(db, batch))
    } catch (error) {
      if (batch.slices.length > 1 && !retry.stopped()) {
        // One message that cannot be stored must not hold up the others: find it by halving.
        const middle = Math.ceil(batch.slices.length / 2)
        for (const half of [part(batch, 0, middle), part(batch, middle, batch.slices.length)]) {
          const committed = await commit(half)
          if (committed) settle(half, committed)
        }
      } else {
        for (const { job } of batch.slices) giveUp(job, error)
      }
      return undefined
    }
  }

  function giveUp(job: Job, error: unknown): void {
    if (!retry.stopped()) log.error({ err: error, device: job.sender.deviceId }, 'A message cannot be stored')
    job.reject(new IngestUnavailable(error instanceof Error ? error.message : String(error)))
  }

  function settle(batch: Batch, committed: Committed): void {
    const now = performance.now()
    const heard = new Map<number, Heard>()
    for (const { job, to } of batch.slices) {
      if (to < job.readings.length) continue
      delays.add(now - job.acceptedAt)
      hear(heard, job)
      job.resolve(job.outcome)
    }
    publish(committed.stored)
    for (const [deviceId, ofDevice] of heard) onHeard(deviceId, ofDevice)
  }

  function publish(stored: Committed['stored']): void {
    for (const [siteSlug, readings] of stored) {
      if (readings.length === 0) continue
      readings.sort((a, b) => a[1] - b[1])
      newestMs = Math.max(newestMs ?? -Infinity, ...readings.slice(-1).map(([, atMs]) => atMs))
      live.publish(siteSlug, { readings })
    }
  }

  function updatePressure(): void {
    const { readings, messages } = line.size()
    const held = readings + messages
    if (!pressed && held > limits.maxWaiting) setPressed(true)
    else if (pressed && held < limits.maxWaiting / 2) setPressed(false)
  }

  function setPressed(on: boolean): void {
    pressed = on
    onPressure(on)
  }

  function waiting(): number {
    return line.size().readings + Math.round(large.bytes() / recordBytes)
  }

  async function stop(deadlineMs = 10_000): Promise<void> {
    stopping = true
    large.giveUpAll(new IngestUnavailable('The server is stopping.'))
    const deadline = setTimeout(() => {
      retry.stop()
      for (const job of line.drain())
        giveUp(job, new Error('The server stopped before the database came back.'))
    }, deadlineMs)
    wake()
    // `running` is renewed by its own end while something waits.
    while (running) await running
    clearTimeout(deadline)
    clearTimeout(timer)
  }

  return {
    accept,
    isFull: () => pressed,
    refuse,
    metrics: () => ({
      waiting: waiting(),
      delayMedianMs: delays.quantile(0.5),
      delayP99Ms: delays.quantile(0.99),
      newestReadingMs: newestMs,
      databaseOk: retry.ok() && (running === undefined || performance.now() - runningSince < slowMs),
    }),
    stop,
  }
}

function part(batch: Batch, from: number, to: number): Batch {
  const slices = batch.slices.slice(from, to)
  return { slices, rows: slices.reduce((sum, slice) => sum + slice.to - slice.from, 0) }
}
