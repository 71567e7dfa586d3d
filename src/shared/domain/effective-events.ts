/** As much of a logged event as it takes to know whether it still counts. */
export interface Correctable {
  id: string
  correctsId: string | null
  happenedAt: number
  recordedAt: number
  fact: { kind: string }
}

/**
 * The events that count: those that no later one replaced or took back, without the withdrawals themselves, in the
 * order in which they happened. A correction stands for what it corrects, and a correction of that for both; taking
 * back the last of such a chain takes back the whole of it.
 */
export function effectiveEvents<T extends Correctable>(events: readonly T[]): T[] {
  const corrected = new Set(events.flatMap((event) => event.correctsId ?? []))
  return events
    .filter((event) => !corrected.has(event.id) && event.fact.kind !== 'withdrawn')
    .sort((a, b) => a.happenedAt - b.happenedAt || a.recordedAt - b.recordedAt || (a.id < b.id ? -1 : 1))
}
