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
  /** @param now monotonic, in ms */
  add(job: Job, now: number): void
  /** The next batch; undefined when nothing waits. */
  take(): Batch | undefined
  /** Readings that wait, and messages; both count as memory. */
  size(): { readings: number; messages: number }
  /** Since when something waits; long ago when a batch left something behind. Undefined when nothing does. */
  waitingSince(): number | undefined
  /** Takes out everything that waits. */
  drain(): Job[]
}

/** A message is late when its newest reading is older than this, in ms: it was kept through an outage. */
const lateAfterMs = 60_000
/** Larger packs are taken in slices. */
const largePack = 200

/**
 * What waits for the database, in two lines: live messages in front, and behind them what devices kept through an
 * outage, of which each batch takes only a slice. In each line the devices take turns, so that one that floods holds
 * up itself and no other.
 */
export function createWaitingLine(limits: { maxRows: number; lateRows: number }): WaitingLine {
  const live = createTurns()
  const late = createTurns()
  let readings = 0
  let since: number | undefined

  function takeFrom(turns: Turns, batch: Batch, maxRows: number): void {
    while (batch.rows < maxRows) {
      const job = turns.next()
      if (!job) return
      const from = job.taken
      const to = Math.min(job.readings.length, from + maxRows - batch.rows)
      batch.slices.push({ job, from, to })
      batch.rows += to - from
      readings -= to - from
      job.taken = to
      if (to === job.readings.length) turns.done()
    }
  }

  return {
    add: (job, now) => {
      readings += job.readings.length
      since ??= now
      if (isLate(job)) late.add(job)
      else live.add(job)
    },
    take: () => {
      const batch: Batch = { slices: [], rows: 0 }
      takeFrom(live, batch, limits.maxRows)
      // Also when nothing live waits: what comes in a moment would have to wait for the whole batch.
      takeFrom(late, batch, Math.min(limits.maxRows, batch.rows + limits.lateRows))
      since = live.size() + late.size() > 0 ? -Infinity : undefined
      return batch.slices.length > 0 ? batch : undefined
    },
    size: () => ({ readings, messages: live.size() + late.size() }),
    waitingSince: () => since,
    drain: () => {
      readings = 0
      since = undefined
      return [...live.drain(), ...late.drain()]
    },
  }
}

function isLate({ readings, receivedAtMs }: Job): boolean {
  if (readings.length > largePack) return true
  return readings.length > 0 && readings.every(({ atMs }) => atMs < receivedAtMs - lateAfterMs)
}

/** A line in which the devices take turns, one message each; each device's own stay in order. */
interface Turns {
  add: (job: Job) => void
  /** The message whose turn it is. */
  next: () => Job | undefined
  /** That message is taken whole. */
  done: () => void
  size: () => number
  drain: () => Job[]
}

function createTurns(): Turns {
  const byDevice = new Map<number, Fifo<Job>>()
  /** Devices with something waiting, in the order of their turns. */
  let turns = createFifo<Fifo<Job>>()
  let size = 0
  return {
    add: (job) => {
      size++
      const { deviceId } = job.sender
      let own = byDevice.get(deviceId)
      if (!own) {
        own = createFifo<Job>()
        byDevice.set(deviceId, own)
        turns.push(own)
      }
      own.push(job)
    },
    next: () => turns.peek()?.peek(),
    done: () => {
      const own = turns.shift()
      const job = own?.shift()
      if (!own || !job) return
      size--
      if (own.size() > 0) turns.push(own)
      else byDevice.delete(job.sender.deviceId)
    },
    size: () => size,
    drain: () => {
      const rest = [...byDevice.values()].flatMap((own) => own.drain())
      byDevice.clear()
      turns = createFifo()
      size = 0
      return rest
    },
  }
}

type Fifo<T> = ReturnType<typeof createFifo<T>>

/** A queue whose ends both cost the same however long it is. */
function createFifo<T>() {
  let items: (T | undefined)[] = []
  let head = 0
  return {
    push: (item: T) => items.push(item),
    peek: () => items[head],
    shift: () => {
      const item = items[head]
      items[head++] = undefined
      if (head > 1024 && head * 2 > items.length) {
        items = items.slice(head)
        head = 0
      }
      return item
    },
    size: () => items.length - head,
    drain: () => {
      const rest = items.slice(head).filter((item) => item !== undefined)
      items = []
      head = 0
      return rest
    },
  }
}
