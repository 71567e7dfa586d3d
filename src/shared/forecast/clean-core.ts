import { modelStepS } from './piece-model.ts'
import type { CookReadings } from './types.ts'

/** The core's readings, one value a model step, doubtful ones left out. */
export interface CoreSeries {
  /** Mean time of the readings behind each value, seconds. */
  timesS: Float64Array
  coreC: Float64Array
  lastReadS: number | undefined
  /** Since when the probe has read what meat cannot do, if it still does. */
  suspectSinceS: number | undefined
  /** When the probe was moved within the meat: a jump that stayed. */
  reseatedS: number[]
}

const driestCoreC = -10
const hottestCoreC = 130
/** A jump that stays this long within the meat is a re-seated probe; a larger one is not believed as soon. */
const smallJumpC = 8
const smallJumpStaysS = 900
const largeDropStaysS = 1500
const largeRiseStaysS = 5400

/**
 * Cleans the core's readings causally: repeated and backward rows dropped, each step's median taken, a value that
 * jumps further than meat can held back until it has stayed. A probe that slides out of the meat reads towards the
 * pit: such a rise is held back for an hour and a half, and the readings count again when they come back.
 *
 * @param eachReading is given every plausible reading in order, before any is held back.
 */
export function cleanCore(
  readings: CookReadings,
  atS: number,
  eachReading: (elapsedS: number, coreC: number) => void,
): CoreSeries {
  const bins = binMedians(readings, atS, eachReading)
  const timesS: number[] = []
  const coreC: number[] = []
  const reseatedS: number[] = []
  let doubt: { atS: number; c: number }[] = []
  const keep = (timeS: number, c: number) => {
    timesS.push(timeS)
    coreC.push(c)
  }
  for (const bin of bins.values) {
    const last = coreC.length - 1
    if (last < 0) {
      keep(bin.atS, bin.c)
      continue
    }
    const lastS = timesS[last] ?? 0
    const lastC = coreC[last] ?? 0
    const back = Math.max(0, last - 3)
    const spanS = lastS - (timesS[back] ?? lastS)
    const slope = spanS > 0 ? (lastC - (coreC[back] ?? lastC)) / spanS : 0
    const gapS = bin.atS - lastS
    const expected = lastC + slope * Math.min(gapS, 3600)
    const tolerance = Math.min(20, 2.5 + (2 * gapS) / 900)
    if (Math.abs(bin.c - expected) <= tolerance) {
      keep(bin.atS, bin.c)
      doubt = []
      continue
    }
    const before = doubt[doubt.length - 1]
    if (before && Math.abs(bin.c - before.c) > 4 + (bin.atS - before.atS) / 300) doubt = []
    doubt.push({ atS: bin.atS, c: bin.c })
    const first = doubt[0] ?? bin
    const jump = first.c - expected
    const staysS =
      Math.abs(jump) < smallJumpC ? smallJumpStaysS : jump < 0 ? largeDropStaysS : largeRiseStaysS
    if (bin.atS - first.atS >= staysS) {
      reseatedS.push(first.atS)
      for (const held of doubt) keep(held.atS, held.c)
      doubt = []
    }
  }
  return {
    timesS: Float64Array.from(timesS),
    coreC: Float64Array.from(coreC),
    lastReadS: bins.lastReadS,
    suspectSinceS: doubt[0]?.atS,
    reseatedS,
  }
}

function binMedians(
  readings: CookReadings,
  atS: number,
  eachReading: (elapsedS: number, coreC: number) => void,
): { values: { atS: number; c: number }[]; lastReadS: number | undefined } {
  const values: { atS: number; c: number }[] = []
  let step = -1
  let times: number[] = []
  let cores: number[] = []
  let newest = -Infinity
  let lastReadS: number | undefined
  const close = () => {
    if (cores.length === 0) return
    const sorted = Float64Array.from(cores).sort()
    const half = sorted.length >> 1
    const upper = sorted[half] ?? Number.NaN
    const c = sorted.length % 2 === 1 ? upper : (upper + (sorted[half - 1] ?? upper)) / 2
    values.push({ atS: times.reduce((sum, time) => sum + time, 0) / times.length, c })
    times = []
    cores = []
  }
  for (let i = 0; i < readings.elapsedS.length; i++) {
    const elapsedS = readings.elapsedS[i] ?? Number.NaN
    const coreC = readings.coreC[i] ?? Number.NaN
    if (elapsedS > atS) break
    if (!(elapsedS > newest) || elapsedS < 0) continue
    newest = elapsedS
    if (!(coreC > driestCoreC && coreC < hottestCoreC)) continue
    eachReading(elapsedS, coreC)
    const here = Math.floor(elapsedS / modelStepS)
    if (here !== step) close()
    step = here
    times.push(elapsedS)
    cores.push(coreC)
    lastReadS = elapsedS
  }
  close()
  return { values, lastReadS }
}
