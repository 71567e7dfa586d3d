import type { Phase } from '../domain/cooking.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { at } from './small-matrix.ts'
import type { CookFacts } from './types.ts'

/** A stall, found from the readings up to now. Times in seconds since the piece went on. */
export interface Stall {
  onsetS: number
  /** Undefined while it lasts. */
  endS: number | undefined
  onsetC: number
  lowestC: number
  highestC: number
}

export interface PhaseReading {
  phase: Phase
  /** How sure, 0.5 to 1: how far the slope lies from the border between the two parts. */
  sure: number
  stall: Stall | undefined
}

const stallFloorC = 50
const slowPerHour = 3
const fastPerHour = 5
const windowS = 2700

/**
 * Which part of the cook a piece is in, from the slope over the last three quarters of an hour, with a gap between
 * entering the stall (below 3 K/h above 50 °C) and leaving it (above 5 K/h), so that it does not flutter. A piece that
 * never slowed is in its push once it is well above where stalls are found (77 °C).
 */
export function readPhase(facts: CookFacts, cook: PreparedCook): PhaseReading {
  const stall = findStall(cook)
  const { timesS, coreC } = cook.core
  const slope = slopePerHour(timesS, coreC, timesS.length - 1)
  const sure = (border: number) => Math.min(1, 0.5 + Math.abs(slope - border) / 8)
  if (cook.pullReachedS !== undefined) return { phase: 'done', sure: 1, stall }
  if (cook.wrapS !== undefined) return { phase: 'wrapped', sure: 1, stall }
  if (stall && stall.endS === undefined) return { phase: 'stall', sure: sure(fastPerHour), stall }
  const coreNow = at(coreC, coreC.length - 1)
  if (stall) return { phase: 'push', sure: sure(slowPerHour), stall }
  if (coreNow >= Math.min(77, facts.pullAtC - 8)) return { phase: 'push', sure: sure(slowPerHour), stall }
  return { phase: 'rise', sure: sure(slowPerHour), stall }
}

function findStall(cook: PreparedCook): Stall | undefined {
  const { timesS, coreC } = cook.core
  let stall: Stall | undefined
  for (let i = 2; i < timesS.length; i++) {
    const c = at(coreC, i)
    if (cook.wrapS !== undefined && at(timesS, i) > cook.wrapS) {
      if (stall && stall.endS === undefined) stall.endS = cook.wrapS
      break
    }
    const slope = slopePerHour(timesS, coreC, i)
    const running = stall && stall.endS === undefined
    if (!running && c >= stallFloorC && slope < slowPerHour) {
      // A dip after the end belongs to the same stall.
      if (stall) stall.endS = undefined
      else
        stall = {
          onsetS: Math.max(0, at(timesS, i) - windowS / 2),
          endS: undefined,
          onsetC: c,
          lowestC: c,
          highestC: c,
        }
    } else if (stall && running && slope > fastPerHour) stall.endS = at(timesS, i) - windowS / 2
    if (stall && stall.endS === undefined) {
      stall.lowestC = Math.min(stall.lowestC, c)
      stall.highestC = Math.max(stall.highestC, c)
    }
  }
  return stall
}

/** Least-squares slope of the values in the window that ends with this one, K/h; NaN with fewer than three. */
function slopePerHour(timesS: Float64Array, coreC: Float64Array, end: number): number {
  const endS = at(timesS, end)
  let n = 0
  let sumT = 0
  let sumC = 0
  let sumTT = 0
  let sumTC = 0
  for (let i = end; i >= 0 && at(timesS, i) > endS - windowS; i--) {
    const t = (at(timesS, i) - endS) / 3600
    const c = at(coreC, i)
    n++
    sumT += t
    sumC += c
    sumTT += t * t
    sumTC += t * c
  }
  const divisor = n * sumTT - sumT * sumT
  return n >= 3 && divisor > 0 ? (n * sumTC - sumT * sumC) / divisor : Number.NaN
}
