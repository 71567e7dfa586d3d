import type { Random } from '../domain/random.ts'
import type { CrewHabit } from './house-model.ts'

/** What a drawn future holds for the wrap. */
export type WrapPlan =
  | { kind: 'at-core'; coreC: number }
  | { kind: 'at'; atS: number }
  | { kind: 'after-reach'; delayS: number }
  | { kind: 'never' }

export interface WrapSituation {
  atS: number
  coreC: number
  wrapAtC: number
  wrapReachedS: number | undefined
}

/**
 * Draws when the crew will wrap from what it did in past cooks, given that it has not yet: the early ones whose
 * temperature has passed and the delays that have run out are no longer possible.
 */
export function createWrapPlans(habit: CrewHabit, now: WrapSituation): (random: Random) => WrapPlan {
  const { wrapReachedS } = now
  const early =
    wrapReachedS === undefined ? habit.earlyC.filter((below) => now.wrapAtC - below > now.coreC) : []
  const waited = wrapReachedS === undefined ? -Infinity : now.atS - wrapReachedS
  const delays = habit.delaysS.filter((delay) => delay > waited)
  // Past every delay seen, a late wrap stays a little likely.
  const lateWeight = delays.length === 0 && wrapReachedS !== undefined ? 0.3 : 0
  const whole = early.length + delays.length + habit.never + lateWeight
  return (random) => {
    if (whole <= 0) return { kind: 'never' }
    let place = random.uniform() * whole
    if (place < early.length) return { kind: 'at-core', coreC: now.wrapAtC - (early[Math.floor(place)] ?? 0) }
    place -= early.length
    if (place < delays.length) {
      const delayS = delays[Math.floor(place)] ?? 0
      return wrapReachedS === undefined
        ? { kind: 'after-reach', delayS }
        : { kind: 'at', atS: wrapReachedS + delayS }
    }
    place -= delays.length
    if (place < lateWeight) return { kind: 'at', atS: now.atS + 3600 * random.uniform() }
    return { kind: 'never' }
  }
}
