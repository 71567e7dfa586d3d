import type { WrapMethod } from '../domain/cooking.ts'
import { cleanCore, type CoreSeries } from './clean-core.ts'
import { modelStepS } from './piece-model.ts'
import { createReachRule } from './reach-rule.ts'
import type { CookEvent, CookFacts, CookReadings } from './types.ts'

/** A cook up to now in the form the model wants: steps of five minutes, cleaned, causal. */
export interface PreparedCook {
  /** Now, seconds since the piece went on. */
  atS: number
  /** Number of model steps up to now; the last one may be short. */
  steps: number
  /** Mean pit temperature of each step, gaps filled, °C. */
  pitC: Float64Array
  /** Share of each step during which the piece was wrapped. */
  wrapShare: Float64Array
  core: CoreSeries
  /** The set that holds now, and since when, seconds. */
  setC: number
  setSinceS: number
  /** The last half hour's median distance of the fire from its set, K; undefined where the pit is silent. */
  pitDistanceC: number | undefined
  /** When the pit was last read, seconds. */
  pitReadS: number | undefined
  wrapS: number | undefined
  /** How it is wrapped now, if it is. */
  wrappedWith: WrapMethod | undefined
  /** When wrap and pull temperature counted as reached. */
  wrapReachedS: number | undefined
  pullReachedS: number | undefined
  lastCoreS: number | undefined
}

/** Puts readings and events up to a moment on the model's grid. Never looks past `atS`. */
export function prepareCook(
  facts: CookFacts,
  readings: CookReadings,
  events: readonly CookEvent[],
  atS: number,
): PreparedCook {
  const steps = Math.floor(atS / modelStepS) + 1
  const reach = createReachRule([facts.wrapAtC, facts.pullAtC])
  const core = cleanCore(readings, atS, (elapsedS, coreC) => reach.add(elapsedS, coreC))
  const past = events.filter((event) => event.elapsedS <= atS).sort((a, b) => a.elapsedS - b.elapsedS)
  const sets = [{ fromS: 0, setC: facts.pitSetC }]
  for (const event of past)
    if (event.kind === 'pit_set') sets.push({ fromS: event.elapsedS, setC: event.pitSetC })
  const last = sets[sets.length - 1] ?? { fromS: 0, setC: facts.pitSetC }
  const { pitC, pitReadS, pitDistanceC } = pitSteps(readings, atS, steps, sets)
  const wrap = wrapSteps(facts, past, atS, steps)
  return {
    atS,
    steps,
    pitC,
    wrapShare: wrap.share,
    core,
    setC: last.setC,
    setSinceS: last.fromS,
    pitDistanceC,
    pitReadS,
    wrapS: wrap.sinceS,
    wrappedWith: wrap.method,
    wrapReachedS: reach.reachedS[0],
    pullReachedS: reach.reachedS[1],
    lastCoreS: core.lastReadS,
  }
}

interface PitSet {
  fromS: number
  setC: number
}

function pitSteps(readings: CookReadings, atS: number, steps: number, sets: readonly PitSet[]) {
  const bins: number[][] = Array.from({ length: steps }, () => [])
  const recent: number[] = []
  const setAt = (elapsedS: number) => sets.findLast((set) => set.fromS <= elapsedS)?.setC ?? Number.NaN
  let pitReadS: number | undefined
  let newest = -Infinity
  for (let i = 0; i < readings.elapsedS.length; i++) {
    const elapsedS = readings.elapsedS[i] ?? Number.NaN
    const pitC = readings.pitC[i] ?? Number.NaN
    if (elapsedS > atS) break
    if (!(elapsedS > newest) || elapsedS < 0) continue
    newest = elapsedS
    if (!(pitC > -30 && pitC < 400)) continue
    bins[Math.min(steps - 1, Math.floor(elapsedS / modelStepS))]?.push(pitC)
    if (elapsedS > atS - 1800) recent.push(pitC - setAt(elapsedS))
    pitReadS = elapsedS
  }
  const pitC = Float64Array.from(bins, (values) => trimmedMean(values))
  fillGaps(pitC, (step) => setAt(step * modelStepS))
  const pitDistanceC = recent.length > 0 ? middle(recent) : undefined
  return { pitC, pitReadS, pitDistanceC }
}

/** The mean of what lies within 30 K of the median: an open door counts, a spike does not. */
function trimmedMean(values: readonly number[]): number {
  if (values.length === 0) return Number.NaN
  const centre = middle(values)
  let sum = 0
  let count = 0
  for (const value of values) {
    if (Math.abs(value - centre) > 30) continue
    sum += value
    count++
  }
  return count > 0 ? sum / count : centre
}

/** A closed gap is bridged straight; an open one holds the last value and leans back to the set within the hour. */
function fillGaps(pitC: Float64Array, setAt: (step: number) => number): void {
  let known = -1
  for (let k = 0; k < pitC.length; k++) {
    const value = pitC[k] ?? Number.NaN
    if (Number.isNaN(value)) continue
    const before = known >= 0 ? (pitC[known] ?? value) : value
    for (let j = known + 1; j < k; j++) pitC[j] = before + ((value - before) * (j - known)) / (k - known)
    known = k
  }
  const held = known >= 0 ? (pitC[known] ?? setAt(0)) : setAt(0)
  for (let k = known + 1; k < pitC.length; k++) {
    const set = setAt(k)
    pitC[k] = set + (held - set) * Math.exp((-(k - known) * modelStepS) / 3600)
  }
}

function wrapSteps(facts: CookFacts, past: readonly CookEvent[], atS: number, steps: number) {
  const share = new Float64Array(steps)
  let sinceS: number | undefined
  let method: WrapMethod | undefined
  const cover = (fromS: number, toS: number) => {
    for (let k = Math.floor(fromS / modelStepS); k < steps; k++) {
      const start = k * modelStepS
      const end = Math.min(atS, start + modelStepS)
      const covered = Math.min(toS, end) - Math.max(fromS, start)
      if (covered > 0 && end > start) share[k] = Math.min(1, (share[k] ?? 0) + covered / (end - start))
    }
  }
  for (const event of past) {
    if (event.kind !== 'wrap') continue
    const told = event.method ?? (facts.wrapMethod === 'none' ? 'paper' : facts.wrapMethod)
    if (told === 'none') {
      if (sinceS !== undefined) cover(sinceS, event.elapsedS)
      sinceS = undefined
      method = undefined
    } else {
      sinceS ??= event.elapsedS
      method = told
    }
  }
  if (sinceS !== undefined) cover(sinceS, atS)
  return { share, sinceS, method }
}

function middle(values: readonly number[]): number {
  const sorted = Float64Array.from(values).sort()
  return sorted[sorted.length >> 1] ?? Number.NaN
}
