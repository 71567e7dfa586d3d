import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { Heard } from './heard.ts'
import type { ChannelSource } from './known-device.ts'

export interface IngestOptions {
  /** Best a pool of its own: two connections are enough, and no page can take them. */
  db: Knex
  clock: Clock
  channels: ChannelSource
  live: { publish: (siteSlug: string, changes: LiveChanges) => void }
  /** Called after each commit, once for each device that sent something in it. */
  onHeard: (deviceId: number, heard: Heard) => void
  /** Called when too much waits, and again when there is room: sockets are not read in between. */
  onPressure: (on: boolean) => void
  /** The same for large packs alone: the others may still come. */
  onLargePressure?: (on: boolean) => void
  log: Logger
  limits?: Partial<IngestLimits>
}

export interface IngestLimits {
  /** How long a message waits for company, in ms. */
  lingerMs: number
  maxRows: number
  /** Rows of late messages in a batch. */
  lateRows: number
  /** Messages and readings that may wait; above it sockets are not read until half of it has gone. */
  maxWaiting: number
  /** A payload above this is a large pack; so many bytes of them may wait to be decoded. */
  largeBytes: number
  maxLargeBytes: number
}

export const usualLimits: IngestLimits = {
  lingerMs: 5,
  maxRows: 5000,
  lateRows: 1000,
  maxWaiting: 100_000,
  largeBytes: 4096,
  maxLargeBytes: 4 * 1024 * 1024,
}
