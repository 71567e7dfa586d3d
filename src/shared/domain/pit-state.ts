import type { CookerKind } from './cooking.ts'

/** The band a pit should stay in, °C. */
export interface PitBand {
  bandLowC: number
  bandHighC: number
}

/** How urgent something abnormal is: a hand is needed soon, or now. */
export type Urgency = 'soon' | 'now'

/** Where a pit stands. Everything but `below`, `above` and `silent` is normal. */
export type PitState =
  /** No probe stands for this pit, so nothing can be said of it. */
  | { kind: 'no-probe' }
  /** Its probe has gone quiet; `lastAt` (ms since 1970 UTC) is null when it was never heard. */
  | { kind: 'silent'; lastAt: number | null }
  /** Nothing is on it: a cold pit is then as right as a hot one. */
  | { kind: 'idle'; c: number }
  | { kind: 'in-band'; c: number }
  | { kind: 'below' | 'above'; c: number; byC: number; urgency: Urgency }

/** What is known of a pit at a moment. */
export interface PitFacts extends PitBand {
  kind: CookerKind
  /** Whether anything is on it. */
  inUse: boolean
  /** Whether a probe stands for it. */
  hasProbe: boolean
  /** Its newest reading, °C and ms since 1970 UTC. */
  latest: { c: number; at: number } | null
  /** Whether its probe has been silent too long to be believed. */
  stale: boolean
}

/** From this far outside the band (25 °F) a hand is needed now, not soon: common practice. */
export const farOutsideC = 25 / 1.8

/** The least temperature for holding hot food, 135 °F: FDA Food Code 3-501.16 (as adopted by states). */
export const hotHoldingC = (135 - 32) / 1.8

/** Where a pit stands against its band. A holding cabinet below 135 °F is urgent however near its band is. */
export function pitState(facts: PitFacts): PitState {
  if (!facts.hasProbe) return { kind: 'no-probe' }
  if (facts.latest === null || facts.stale) return { kind: 'silent', lastAt: facts.latest?.at ?? null }
  const { c } = facts.latest
  if (!facts.inUse) return { kind: 'idle', c }
  const byC = outsideBand(c, facts)
  if (byC === 0) return { kind: 'in-band', c }
  const tooCoolToHold = facts.kind === 'holding' && c < hotHoldingC
  const urgency = Math.abs(byC) >= farOutsideC || tooCoolToHold ? 'now' : 'soon'
  return { kind: byC < 0 ? 'below' : 'above', c, byC: Math.abs(byC), urgency }
}

/** Whether a state asks for a hand. */
export function isAbnormal(state: PitState): boolean {
  return state.kind === 'below' || state.kind === 'above' || state.kind === 'silent'
}

/** How far a temperature lies outside the band, in K: negative below, positive above, 0 within. */
export function outsideBand(c: number, band: PitBand): number {
  if (c < band.bandLowC) return c - band.bandLowC
  if (c > band.bandHighC) return c - band.bandHighC
  return 0
}

/**
 * Where a temperature stands on a gauge that shows the band in its middle third: 0 is one band's width below the
 * band, 1/3 its low end, 2/3 its high end, 1 one width above. Values beyond are kept at the ends.
 */
export function gaugePosition(c: number, band: PitBand): number {
  const width = band.bandHighC - band.bandLowC
  return Math.min(1, Math.max(0, (c - band.bandLowC + width) / (3 * width)))
}
