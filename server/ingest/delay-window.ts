import { performance } from 'node:perf_hooks'

/** Delays of the last minute, in a fixed space whatever their number. */
export interface DelayWindow {
  /** Notes that `count` messages took so long, in ms. */
  add(delayMs: number, count?: number): void
  /** The delay below which this share of the last minute's messages stayed, in ms; null when there were none. */
  quantile(share: number): number | null
}

/** Steps of 5 %: from 0.1 ms on, 320 of them reach ten minutes. */
const ratio = 1.05
const firstMs = 0.1
const steps = 320
const seconds = 60

/**
 * Keeps delays in one histogram a second, with logarithmic steps: a quantile is right within 5 %.
 * @param now a monotonic time in ms
 */
export function createDelayWindow(now: () => number = () => performance.now()): DelayWindow {
  const slots = Array.from({ length: seconds }, () => ({ second: -1, counts: new Uint32Array(steps) }))

  return {
    add: (delayMs, count = 1) => {
      const second = Math.floor(now() / 1000)
      const slot = slots[second % seconds]
      if (!slot) return
      if (slot.second !== second) {
        slot.second = second
        slot.counts.fill(0)
      }
      const step = Math.ceil(Math.log(Math.max(delayMs, firstMs) / firstMs) / Math.log(ratio))
      const index = Math.min(steps - 1, step)
      slot.counts[index] = (slot.counts[index] ?? 0) + count
    },
    quantile: (share) => {
      const oldest = Math.floor(now() / 1000) - seconds
      const recent = slots.filter((slot) => slot.second > oldest)
      const sums = Array.from({ length: steps }, (_, step) =>
        recent.reduce((sum, slot) => sum + (slot.counts[step] ?? 0), 0),
      )
      const total = sums.reduce((sum, count) => sum + count, 0)
      if (total === 0) return null
      let below = 0
      const step = sums.findIndex((count) => (below += count) >= share * total)
      return firstMs * ratio ** step
    },
  }
}
