import { mean } from 'simple-statistics'
import { at } from '#shared/forecast/small-matrix.ts'
import type { Target } from '#shared/forecast/correction.ts'
import type { FinishedCook } from '#shared/forecast/finished-cook.ts'

/** A simple rule's answer: remaining seconds, with an interval where the rule has one. */
export interface RuleAnswer {
  p10?: number
  p50: number
  p90?: number
}

export const ruleNames = ['last hour', 'mean by pit', 'hours per kg', '30 nearest'] as const
export type RuleName = (typeof ruleNames)[number]

export interface SimpleRules {
  answer(rule: RuleName, cook: FinishedCook, atS: number, target: Target): RuleAnswer | undefined
}

/** A forecast by a rule is never nearer than this nor further, seconds. */
const nearestS = 300
const furthestS = 24 * 3600
const neighbours = 30
const historyEveryS = 900
/** 1 to 1.5 hours a pound at 225–250 °F (common practice), for a house without history; the wrap at six tenths of it. */
const practiceSPerKg = 1.25 * 3600 * 2.2046

/**
 * The rules that a person could follow without a model. With history they learn from it what they can; intervals are
 * the history's own spread of truth over rule, for the nearest cooks that of the thirty.
 */
export function createSimpleRules(history: readonly FinishedCook[]): SimpleRules {
  const moments = history.flatMap((cook, index) => momentsOf(cook, index))
  const pointOf = (
    rule: Exclude<RuleName, '30 nearest'>,
    cook: FinishedCook,
    atS: number,
    target: Target,
  ) => {
    if (rule === 'last hour') return lastHour(cook, atS, target)
    const meanS =
      rule === 'mean by pit' ? meanByPit(history, cook, target) : perKilogram(history, cook, target)
    return meanS === undefined ? undefined : clip(meanS - atS)
  }
  const spreads = new Map<string, { low: number; high: number }>()
  for (const rule of ruleNames) {
    if (rule === '30 nearest' || history.length < 10) continue
    for (const target of ['wrap', 'pull'] as const) {
      const ratios = moments.flatMap(({ cook, atS, remaining }) => {
        const point = pointOf(rule, cook, atS, target)
        const truth = remaining[target]
        return point === undefined || truth === undefined ? [] : [truth / point]
      })
      const sorted = Float64Array.from(ratios).sort()
      const share = (part: number) => at(sorted, Math.floor(part * (sorted.length - 1)))
      if (sorted.length > 0) spreads.set(`${rule} ${target}`, { low: share(0.1), high: share(0.9) })
    }
  }
  return {
    answer: (rule, cook, atS, target) => {
      if (rule === '30 nearest') return nearest(moments, cook, atS, target)
      const p50 = pointOf(rule, cook, atS, target)
      if (p50 === undefined) return undefined
      const spread = spreads.get(`${rule} ${target}`)
      return spread ? { p10: p50 * spread.low, p50, p90: p50 * spread.high } : { p50 }
    },
  }
}

function lastHour(cook: FinishedCook, atS: number, target: Target): number | undefined {
  const now = coreNear(cook, atS)
  const before = coreNear(cook, Math.max(300, atS - 3600))
  if (now === undefined || before === undefined || now.atS - before.atS < 600) return undefined
  const perS = (now.c - before.c) / (now.atS - before.atS)
  const aim = target === 'wrap' ? cook.facts.wrapAtC : cook.facts.pullAtC
  return perS <= 0 ? furthestS / 2 : Math.min(furthestS / 2, clip((aim - now.c) / perS))
}

function meanByPit(history: readonly FinishedCook[], cook: FinishedCook, target: Target): number | undefined {
  const reached = history.flatMap((past) => {
    const reachedS = reachedOf(past, target)
    return reachedS === undefined ? [] : [{ reachedS, pitSetC: past.facts.pitSetC }]
  })
  const near = reached.filter(({ pitSetC }) => Math.abs(pitSetC - cook.facts.pitSetC) < 4)
  const used = near.length >= 3 ? near : reached
  return used.length === 0 ? undefined : mean(used.map(({ reachedS }) => reachedS))
}

function perKilogram(history: readonly FinishedCook[], cook: FinishedCook, target: Target): number {
  let seconds = 0
  let kilograms = 0
  for (const past of history) {
    const reachedS = reachedOf(past, target)
    if (reachedS === undefined) continue
    seconds += reachedS
    kilograms += past.facts.rawKg
  }
  const rate = kilograms > 0 ? seconds / kilograms : practiceSPerKg * (target === 'wrap' ? 0.6 : 1)
  return rate * cook.facts.rawKg
}

interface Moment {
  cook: FinishedCook
  index: number
  atS: number
  place: Float64Array
  remaining: Partial<Record<Target, number>>
}

function nearest(
  moments: readonly Moment[],
  cook: FinishedCook,
  atS: number,
  target: Target,
): RuleAnswer | undefined {
  const place = placeOf(cook, atS)
  if (!place) return undefined
  const best = new Map<number, { distance: number; remaining: number }>()
  for (const moment of moments) {
    const remaining = moment.remaining[target]
    if (remaining === undefined) continue
    let distance = 0
    for (let i = 0; i < place.length; i++) distance += (at(place, i) - at(moment.place, i)) ** 2
    const known = best.get(moment.index)
    if (!known || distance < known.distance) best.set(moment.index, { distance, remaining })
  }
  const near = [...best.values()].sort((a, b) => a.distance - b.distance).slice(0, neighbours)
  if (near.length < 5) return undefined
  const times = Float64Array.from(near, ({ remaining }) => remaining).sort()
  const share = (part: number) => at(times, Math.round(part * (times.length - 1)))
  return { p10: share(0.1), p50: times.reduce((sum, time) => sum + time, 0) / times.length, p90: share(0.9) }
}

function momentsOf(cook: FinishedCook, index: number): Moment[] {
  const endS = cook.pullReachedS ?? 0
  const moments: Moment[] = []
  for (let atS = 1800; atS < endS; atS += historyEveryS) {
    const place = placeOf(cook, atS)
    if (!place) continue
    const { wrapReachedS, pullReachedS } = cook
    moments.push({
      cook,
      index,
      atS,
      place,
      remaining: {
        ...(wrapReachedS !== undefined && wrapReachedS > atS ? { wrap: wrapReachedS - atS } : {}),
        ...(pullReachedS !== undefined && pullReachedS > atS ? { pull: pullReachedS - atS } : {}),
      },
    })
  }
  return moments
}

/** Where a cook stands, each coordinate in units of a difference that matters. */
function placeOf(cook: FinishedCook, atS: number): Float64Array | undefined {
  const now = coreNear(cook, atS)
  const before = coreNear(cook, Math.max(300, atS - 3600))
  if (!now || !before) return undefined
  const slope = ((now.c - before.c) * 3600) / Math.max(600, now.atS - before.atS)
  const wrapped = cook.events.some((event) => event.kind === 'wrap' && event.elapsedS <= atS)
  const set = cook.events.reduce(
    (held, event) => (event.kind === 'pit_set' && event.elapsedS <= atS ? event.pitSetC : held),
    cook.facts.pitSetC,
  )
  return Float64Array.of(
    now.c / 3,
    atS / 3600 / 0.75,
    slope / 3,
    set / 6,
    cook.facts.rawKg / 0.8,
    cook.facts.cured ? 1.5 : 0,
    wrapped ? 2 : 0,
    cook.facts.wrapMethod === 'none' ? 1 : 0,
  )
}

/** The median of the ten minutes' readings up to a moment, looking back up to an hour where there are none. */
function coreNear({ readings }: FinishedCook, atS: number): { atS: number; c: number } | undefined {
  let end = upTo(readings.elapsedS, atS)
  const values: number[] = []
  let newest: number | undefined
  for (; end > 0; end--) {
    const time = at(readings.elapsedS, end - 1)
    const c = at(readings.coreC, end - 1)
    if (time < atS - 3600 || (newest !== undefined && time < newest - 600)) break
    if (!(c > -10 && c < 130)) continue
    newest ??= time
    values.push(c)
  }
  if (newest === undefined) return undefined
  values.sort((a, b) => a - b)
  return { atS: newest, c: at(values, values.length >> 1) }
}

/** How many of the sorted times lie at or before a moment. */
function upTo(times: Float64Array, atS: number): number {
  let low = 0
  let high = times.length
  while (low < high) {
    const middle = (low + high) >> 1
    if (at(times, middle) <= atS) low = middle + 1
    else high = middle
  }
  return low
}

/** The core at a moment for the fixed rule of parts. */
export function coreAt(cook: FinishedCook, atS: number): number {
  return coreNear(cook, atS)?.c ?? Number.NaN
}

function reachedOf(cook: FinishedCook, target: Target): number | undefined {
  return target === 'wrap' ? cook.wrapReachedS : cook.pullReachedS
}

function clip(seconds: number): number {
  return Math.min(furthestS, Math.max(nearestS, seconds))
}
