import type { CookEvent, CookFacts, CookReadings } from './types.ts'

/** A finished cook to learn from. Times in seconds since the piece went on. */
export interface FinishedCook {
  facts: CookFacts
  events: readonly CookEvent[]
  readings: CookReadings
  /** When its wrap and pull temperatures counted as reached. */
  wrapReachedS: number | undefined
  pullReachedS: number | undefined
}
