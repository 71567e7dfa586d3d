import { effectiveEvents } from '#shared/domain/effective-events.ts'
import type { LoggedEvent } from '#shared/domain/piece-projection.ts'

/** A change of a pit's set, with what it was before where that is known, °C. */
export type SetChange = LoggedEvent & { pitSetBeforeC: number | null }

/** A cooker's set now and every logged change of it. */
export interface PitSetHistory {
  setNowC: number
  changes: readonly SetChange[]
}

/** A stretch on a cooker, half open, ms since 1970 UTC; `to` is null while it lasts. */
export interface Stretch {
  cookerId: number
  from: number
  to: number | null
}

/** A moment from which a pit was set to a temperature: ms since 1970 UTC, °C. */
export interface SetStep {
  at: number
  pitSetC: number
}

/**
 * What the pits that a piece stood in were set to, from its first moment on: a step where it begins, at each logged
 * change, at each move to a cooker set otherwise, and at `until` if the set was changed without anybody logging it.
 * Where nothing earlier is known, a pit was always set as it is now.
 */
export function pitSetCourse(
  stretches: readonly Stretch[],
  histories: ReadonlyMap<number, PitSetHistory>,
  until: number,
): SetStep[] {
  const steps: SetStep[] = []
  const add = (at: number, pitSetC: number) => {
    if (steps.at(-1)?.pitSetC !== pitSetC) steps.push({ at, pitSetC })
  }
  for (const { cookerId, from, to } of stretches) {
    const history = histories.get(cookerId)
    if (!history || from > until) continue
    const changes = effectiveEvents(history.changes)
    add(from, setAt(history, changes, from))
    const end = Math.min(to ?? until, until)
    for (const change of changes) {
      if (change.fact.kind !== 'pit_set' || change.happenedAt <= from || change.happenedAt > end) continue
      add(change.happenedAt, change.fact.pitSetC)
    }
    if (to === null && changes.every((change) => change.happenedAt <= until)) add(until, history.setNowC)
  }
  return steps
}

function setAt(history: PitSetHistory, changes: readonly SetChange[], at: number): number {
  const earlier = changes.findLast((change) => change.happenedAt <= at)
  if (earlier?.fact.kind === 'pit_set') return earlier.fact.pitSetC
  return changes.find((change) => change.happenedAt > at)?.pitSetBeforeC ?? history.setNowC
}
