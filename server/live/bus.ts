import type { LiveChanges } from '#shared/contract/live.ts'

export type LiveListener = (siteSlug: string, changes: LiveChanges) => void

/** Where services say what changed, after it was committed, and the live rooms hear of it. */
export interface LiveBus {
  publish: (siteSlug: string, changes: LiveChanges) => void
  /** @returns ends the subscription */
  subscribe: (listener: LiveListener) => () => void
}

export function createLiveBus(): LiveBus {
  const listeners = new Set<LiveListener>()
  return {
    publish: (siteSlug, changes) => {
      for (const listener of listeners) listener(siteSlug, changes)
    },
    subscribe: (listener) => {
      listeners.add(listener)
      return () => listeners.delete(listener)
    },
  }
}
