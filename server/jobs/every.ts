import type { Logger } from 'pino'

export interface EveryOptions {
  name: string
  /** From the end of one run to the beginning of the next, ms. */
  intervalMs: number
  /** Before the first run, ms. */
  firstAfterMs?: number
  log: Logger
}

/**
 * Runs a task again and again, never twice at once. A run that fails is logged and tried again at the next turn.
 * @returns stop: no new run after it is called; it resolves once a running one has ended
 */
export function every(options: EveryOptions, task: () => Promise<void>): () => Promise<void> {
  const { name, intervalMs, firstAfterMs = 0, log } = options
  let running: Promise<void> = Promise.resolve()
  let stopped = false
  let timer = setTimeout(turn, firstAfterMs)

  function turn(): void {
    running = task()
      .catch((error: unknown) => {
        if (!stopped) log.warn({ err: error }, `${name} failed; it is tried again in ${intervalMs / 1000} s`)
      })
      .then(() => {
        if (!stopped) timer = setTimeout(turn, intervalMs)
      })
  }

  return () => {
    stopped = true
    clearTimeout(timer)
    return running
  }
}
