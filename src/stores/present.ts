import { defineStore } from 'pinia'
import { computed, ref } from 'vue'
import { systemClock } from '@/shared/domain/clock.ts'

/**
 * The present as the server sees it, moving once a second: a tablet whose own clock is wrong still shows the
 * right ages and countdowns.
 */
export const usePresent = defineStore('present', () => {
  const offsetMs = ref(0)
  const now = ref(systemClock.now())
  let timer: ReturnType<typeof setInterval> | undefined

  const tick = () => {
    now.value = systemClock.now() + offsetMs.value
  }

  /** Starts the ticking; gives back what stops it. */
  function start(): () => void {
    if (timer !== undefined) clearInterval(timer)
    tick()
    timer = setInterval(tick, 1000)
    return () => {
      if (timer !== undefined) clearInterval(timer)
      timer = undefined
    }
  }

  /** Learns the server's clock from a message that was just received. */
  function learn(serverMs: number): void {
    const offset = serverMs - systemClock.now()
    // Below a quarter of a second it is the network's delay, not the clock; following it would make ages jump.
    if (Math.abs(offset - offsetMs.value) < 250) return
    offsetMs.value = offset
    tick()
  }

  /** The beginning of the running quarter of an hour: changes seldom (zones differ by quarters), for what only needs the day. */
  const quarter = computed(() => Math.floor(now.value / 900_000) * 900_000)

  return { now, quarter, start, learn }
})
