/** What the server does without being asked. */
export const jobKinds = [
  'forecast',
  'forecast-round',
  'learning',
  'roll-ups',
  'partitions',
  'retention',
  'thinning',
  'tidying',
] as const
export type JobKind = (typeof jobKinds)[number]

/** A turn comes every `everyMin` minutes, `offsetMin` minutes into it, counted from midnight UTC. */
export interface JobTurns {
  /** Divides a day. */
  everyMin: number
  offsetMin: number
}

/**
 * When each kind's turn comes: the one place that says so. A kind without turns is asked for by others. The slow ones
 * begin at minutes of their own, so that they do not start together.
 */
export const jobTurns: Record<JobKind, JobTurns | null> = {
  forecast: null,
  'forecast-round': { everyMin: 1, offsetMin: 0 },
  learning: { everyMin: 10, offsetMin: 2 },
  'roll-ups': { everyMin: 1, offsetMin: 0 },
  partitions: { everyMin: 24 * 60, offsetMin: 3 * 60 + 10 },
  retention: { everyMin: 24 * 60, offsetMin: 3 * 60 + 40 },
  thinning: { everyMin: 60, offsetMin: 7 },
  tidying: { everyMin: 60, offsetMin: 37 },
}

const minuteMs = 60_000
const dayMin = 24 * 60

/** Whether a kind's turn comes at a minute of the day, UTC. */
export function isTurn(turns: JobTurns, minuteOfDay: number): boolean {
  return (minuteOfDay - turns.offsetMin + dayMin) % turns.everyMin === 0
}

/** The first turn after a moment, both in ms since 1970 UTC. */
export function nextTurn({ everyMin, offsetMin }: JobTurns, nowMs: number): number {
  const everyMs = everyMin * minuteMs
  const offsetMs = (offsetMin % everyMin) * minuteMs
  return (Math.floor((nowMs - offsetMs) / everyMs) + 1) * everyMs + offsetMs
}
