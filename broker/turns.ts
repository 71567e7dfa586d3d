import type { TokenBucket } from './token-bucket.ts'

/** A line in which each waits for its turn. */
export interface Turns {
  /** `go` is called when it is its turn, at once if nobody waits and the rate allows it. */
  wait: (go: () => void) => void
  /** Nobody gets a turn any more. */
  stop: () => void
}

/** How long those wait for whom there was no turn, in ms. */
const restMs = 10

/** Lets go as many as a rate allows, in the order in which they came. */
export function createTurns(rate: TokenBucket): Turns {
  let waiting: (() => void)[] = []
  let next = 0
  let timer: NodeJS.Timeout | undefined
  let stopped = false

  function letGo(): void {
    timer = undefined
    while (next < waiting.length && rate.take()) waiting[next++]?.()
    if (next === waiting.length) {
      waiting = []
      next = 0
    } else timer = setTimeout(letGo, restMs)
  }

  return {
    wait: (go) => {
      if (stopped) return
      waiting.push(go)
      if (!timer) letGo()
    },
    stop: () => {
      stopped = true
      clearTimeout(timer)
      waiting = []
      next = 0
    },
  }
}
