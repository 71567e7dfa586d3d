import type { Job } from './job.ts'

/** A part of a job that goes into one batch: its readings from `from` up to, not including, `to`. */
export interface Slice {
  job: Job
  from: number
  to: number
}

export interface Batch {
  slices: Slice[]
  rows: number
}

export interface WaitingLine {
  add(job: Job): void
  /** The next batch; undefined when nothing waits. */
  take(): Batch | undefined
  /** Readings that wait, and messages; both count as memory. */
  size(): { readings: number; messages: number }
  /** When the message that waits longest was accepted; monotonic, in ms. */
  oldest(): number | undefined
  /** Takes out everything that waits. */
  drain(): Job[]
}

/** A message is late when its newest reading is older than this, in ms: it was kept through an outage. */
const lateAfterMs = 60_000
/** Larger packs are taken in slices. */
const largePack = 200

/**
 * What waits for the database, in two lines: live messages in front, and behind them what devices kept through an
 * outage, of which each batch takes only a slice while there is live traffic.
 */
export function createWaitingLine(limits: { maxRows: number; lateRows: number }): WaitingLine {
  const live = createFifo()
  const late = createFifo()
  let readings = 0

  const takeFrom = (fifo: Fifo, batch: Batch, maxRows: number) => {
    while (batch.rows < maxRows) {
      const job = fifo.peek()
      if (!job) return
      const from = job.taken
      const to = Math.min(job.readings.length, from + maxRows - batch.rows)
      batch.slices.push({ job, from, to })
      batch.rows += to - from
      readings -= to - from
      job.taken = to
      if (to === job.readings.length) fifo.shift()
    }
  }

  return {
    add: (job) => {
      readings += job.readings.length
      if (isLate(job)) late.push(job)
      else live.push(job)
    },
    take: () => {
      const batch: Batch = { slices: [], rows: 0 }
      takeFrom(live, batch, limits.maxRows)
      const room =
        batch.slices.length > 0 ? Math.min(limits.maxRows, batch.rows + limits.lateRows) : limits.maxRows
      takeFrom(late, batch, room)
      return batch.slices.length > 0 ? batch : undefined
    },
    size: () => ({ readings, messages: live.size() + late.size() }),
    oldest: () => {
      const times = [live.peek()?.acceptedAt, late.peek()?.acceptedAt].filter((time) => time !== undefined)
      return times.length > 0 ? Math.min(...times) : undefined
    },
    drain: () => {
      readings = 0
      return [...live.drain(), ...late.drain()]
    },
  }
}

function isLate({ readings, receivedAtMs }: Job): boolean {
  if (readings.length > largePack) return true
  return readings.length > 0 && readings.every(({ atMs }) => atMs < receivedAtMs - lateAfterMs)
}

type Fifo = ReturnType<typeof createFifo>

/** A queue whose ends both cost the same however long it is. */
function createFifo() {
  let jobs: Job[] = []
  let head = 0
  return {
    push: (job: Job) => jobs.push(job),
    peek: () => jobs[head],
    shift: () => {
      head++
      if (head > 1024 && head * 2 > jobs.length) {
        jobs = jobs.slice(head)
        head = 0
      }
    },
    size: () => jobs.length - head,
    drain: () => {
      const rest = jobs.slice(head)
      jobs = []
      head = 0
      return rest
    },
  }
}
