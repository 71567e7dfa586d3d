import type { PieceFact } from './story.ts'

/** A door held open: which cooker, for how long. */
export interface DoorOpening {
  cooker: string
  seconds: number
}

/**
 * The doors that a piece's event opened, by what hands do at it (common practice, durations from the trade's own
 * accounts rounded). `standsOn` is where the piece stood until then.
 */
export function doorOpenings(fact: PieceFact, standsOn: string | undefined): DoorOpening[] {
  const doors = (...pairs: [cooker: string | undefined, seconds: number][]) =>
    pairs.flatMap(([cooker, seconds]) => (cooker === undefined ? [] : [{ cooker, seconds }]))
  switch (fact.kind) {
    case 'on':
      return doors([fact.cooker, 50])
    case 'spritz':
      return doors([standsOn, 25])
    case 'wrap':
      return doors([standsOn, 70])
    case 'moved':
      return doors([standsOn, 35], [fact.toCooker, 35])
    case 'probe_reseated':
    case 'pull':
      return doors([standsOn, 30])
    case 'hold':
      return doors([fact.cooker, 25])
    default:
      return []
  }
}
