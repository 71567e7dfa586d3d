import type { SenmlRecord } from '#shared/contract/senml.ts'

import type { ChannelValue } from './live-house.ts'

/** What a device read at one moment. */
export interface DeviceReport {
  atMs: number
  values: readonly ChannelValue[]
}

/** What a device has not been rid of yet. */
export interface Outbox {
  /** Takes a fresh report in; the one before it, if it was never sent, is thinned to one a minute. */
  add(report: DeviceReport): void
  /** What to send next: the freshest first, then older ones together. Undefined when there is nothing. */
  next(): DeviceReport[] | undefined
  /** The reports of the last `next` have arrived. */
  arrived(): void
  /** They have not: they are kept. */
  failed(): void
  readonly waiting: number
}

/** How many old reports go into one pack: a pack stays far below the broker's 64 kB. */
const MOST_TOGETHER = 40
/** What a small device can remember: a day and a half of minutes. */
const MOST_KEPT = 2160

/** Keeps a device's reports until they are acknowledged, as a device with a little memory does. */
export function createOutbox(): Outbox {
  let fresh: DeviceReport | undefined
  /** By minute: one of each is enough of what is past. */
  const old = new Map<number, DeviceReport>()
  let sent: DeviceReport[] | undefined

  const keep = (report: DeviceReport) => {
    const minute = Math.floor(report.atMs / 60_000)
    if (!old.has(minute)) old.set(minute, report)
    if (old.size > MOST_KEPT) old.delete(Math.min(...old.keys()))
  }

  const takeOldest = () => {
    const minutes = [...old.keys()].sort((a, b) => a - b).slice(0, MOST_TOGETHER)
    const reports = minutes.flatMap((minute) => old.get(minute) ?? [])
    for (const minute of minutes) old.delete(minute)
    return reports
  }

  return {
    add(report) {
      if (report.values.length === 0) return
      if (fresh !== undefined) keep(fresh)
      fresh = report
    },
    next() {
      if (sent !== undefined) return undefined
      if (fresh !== undefined) {
        sent = [fresh]
        fresh = undefined
      } else if (old.size > 0) {
        sent = takeOldest()
      }
      return sent
    },
    arrived: () => {
      sent = undefined
    },
    failed: () => {
      for (const report of sent ?? []) keep(report)
      sent = undefined
    },
    get waiting() {
      return old.size + (fresh === undefined ? 0 : 1) + (sent?.length ?? 0)
    },
  }
}

/**
 * Reports as one SenML pack (RFC 8428): base time and unit in the first record, the channels' numbers as names, older
 * records by their offset in seconds.
 */
export function senmlPack(
  reports: readonly DeviceReport[],
  extra: readonly SenmlRecord[] = [],
): SenmlRecord[] {
  const baseMs = reports.at(-1)?.atMs ?? 0
  const records: SenmlRecord[] = reports.flatMap(({ atMs, values }) =>
    values.map(({ channel, valueC }) => ({
      n: String(channel),
      v: valueC,
      ...(atMs === baseMs ? {} : { t: (atMs - baseMs) / 1000 }),
    })),
  )
  const [first, ...rest] = [...records, ...extra]
  return first === undefined ? [] : [{ bn: '', bt: baseMs / 1000, bu: 'Cel', ...first }, ...rest]
}
