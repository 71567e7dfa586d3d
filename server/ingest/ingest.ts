import { performance } from 'node:perf_hooks'
import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { RejectionReason } from '#shared/contract/device.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { SenmlRecord } from '#shared/contract/senml.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { commitBatch, type Committed } from './commit-batch.ts'
import { decodePack } from './decode.ts'
import { createDelayWindow } from './delay-window.ts'
import { createJob, type Job, type Outcome, type Received } from './job.ts'
import type { ChannelSource, Sender } from './known-device.ts'
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

export interface IngestOptions {
  /** Best a pool of its own: two connections are enough, and no page can take them. */
  db: Knex
  clock: Clock
  channels: ChannelSource
  live: { publish: (siteSlug: string, changes: LiveChanges) => void }
  /** Called after commit, for each message with something in it. */
  onHeard: (deviceId: number, heard: Heard) => void
  /** Called when too much waits, and again when there is room: sockets are not read in between. */
  onPressure: (on: boolean) => void
  log: Logger
  limits?: Partial<IngestLimits>
}

export interface Heard {
  atMs: number
  batteryPercent: number | undefined
  signalDbm: number | undefined
}

export interface IngestLimits {
  /** How long a message waits for company, in ms. */
  lingerMs: number
  maxRows: number
  /** Rows of late messages in a batch that has live ones. */
  lateRows: number
  /** Messages and readings that may wait; above it sockets are not read until half of it has gone. */
  maxWaiting: number
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

const defaultLimits: IngestLimits = { lingerMs: 5, maxRows: 1000, lateRows: 300, maxWaiting: 100_000 }

/**
 * Takes readings in: decodes and checks each message at once, collects for a few milliseconds, commits with one insert
 * in flight, and only then lets the sender know. While the database is away messages wait, within a bound.
 */
export function createIngest(options: IngestOptions): Ingest {
  const { db, clock, channels, live, onHeard, onPressure, log } = options
  const limits = { ...defaultLimits, ...options.limits }
  const line = createWaitingLine(limits)
  const delays = createDelayWindow()
  const retry = createRetry({ log, waiting: () => line.size().readings })
  let newestMs: number | null = null
  let running: Promise<void> | undefined
  let timer: NodeJS.Timeout | undefined
  let pressed = false
  let stopping = false

  function accept({ device, topic, payload }: IngestMessage): Promise<Outcome> {
    const message = { sender: device, topic, receivedAtMs: clock.now(), acceptedAt: performance.now() }
    const known = channels.known(device.deviceId)
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
      running = work().finally(() => {
        running = undefined
        wake()
      })
    } else {
      timer ??= setTimeout(() => {
        timer = undefined
        wake()
      }, waitMs)
    }
  }

  async function work(): Promise<void> {
    const batch = line.take()
    if (!batch) return
    await store(batch)
    updatePressure()
  }

  async function store(batch: Batch): Promise<void> {
    let committed: Committed
    try {
      committed = await retry.until(() => commitBatch(db, batch))
    } catch (error) {
      if (batch.slices.length > 1 && !retry.stopped()) {
        // One message that cannot be stored must not hold up the others: find it by halving.
        const middle = Math.ceil(batch.slices.length / 2)
        await store(part(batch, 0, middle))
        await store(part(batch, middle, batch.slices.length))
      } else {
        for (const { job } of batch.slices) giveUp(job, error)
      }
      return
    }
    settle(batch, committed)
  }

  function giveUp(job: Job, error: unknown): void {
    if (!retry.stopped()) log.error({ err: error, device: job.sender.deviceId }, 'A message cannot be stored')
    job.reject(new IngestUnavailable(error instanceof Error ? error.message : String(error)))
  }

  function settle(batch: Batch, committed: Committed): void {
    const now = performance.now()
    publish(committed.stored)
    for (const { job, to } of batch.slices) {
      if (to < job.readings.length) continue
      delays.add(now - job.acceptedAt)
      const { batteryPercent, signalDbm } = job
      if (job.readings.length > 0 || batteryPercent !== undefined || signalDbm !== undefined) {
        onHeard(job.sender.deviceId, { atMs: job.receivedAtMs, batteryPercent, signalDbm })
      }
      job.resolve(job.outcome)
    }
  }

  function publish(stored: Committed['stored']): void {
    for (const [siteSlug, readings] of stored) {
      readings.sort((a, b) => a[1] - b[1])
      newestMs = Math.max(newestMs ?? -Infinity, ...readings.slice(-1).map(([, atMs]) => atMs))
      live.publish(siteSlug, { readings })
    }
  }

  function updatePressure(): void {
    const { readings, messages } = line.size()
    const waiting = readings + messages
    if (!pressed && waiting > limits.maxWaiting) setPressed(true)
    else if (pressed && waiting < limits.maxWaiting / 2) setPressed(false)
  }

  function setPressed(on: boolean): void {
    pressed = on
    onPressure(on)
  }

  async function stop(deadlineMs = 10_000): Promise<void> {
    stopping = true
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
      waiting: line.size().readings,
      delayMedianMs: delays.quantile(0.5),
      delayP99Ms: delays.quantile(0.99),
      newestReadingMs: newestMs,
      databaseOk: retry.ok(),
    }),
    stop,
  }
}

function part(batch: Batch, from: number, to: number): Batch {
  const slices = batch.slices.slice(from, to)
  return { slices, rows: slices.reduce((sum, slice) => sum + slice.to - slice.from, 0) }
}
