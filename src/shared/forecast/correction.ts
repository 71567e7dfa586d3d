import { cookPartOf, cookParts } from './cook-part.ts'
import { at } from './small-matrix.ts'
import type { ReachTimes } from './types.ts'

/**
 * What past forecasts got wrong, as factors: by how many half-widths the median lay off, and how much wider the lower
 * and the upper half must be so that eight in ten times lie within.
 */
export interface CorrectionCell {
  shift: number
  low: number
  high: number
}

export const targets = ['wrap', 'pull'] as const
export type Target = (typeof targets)[number]

/** A cell for each part of the cook and horizon, for each target. */
export type Correction = Record<Target, CorrectionCell[]>

/** A forecast of a past cook with how it came out. Times in seconds from then. */
export interface PastForecast {
  cook: string
  coreC: number
  times: ReachTimes
  truthS: number
}

/** Horizons, by the forecast median's distance, seconds. */
const horizonsS = [5400, 18000]
const cellCount = cookParts.length * (horizonsS.length + 1)
/** No interval half is narrower than this before correction: the rule for "reached" itself is no surer. */
const leastHalfS = 60
/** How many cooks a wider pool is worth against a cell's own, and the general correction against a house's. */
const poolWorth = 12
const generalWorth = 10

/** No correction at all. */
export function plainCorrection(): Correction {
  const cells = () => Array.from({ length: cellCount }, () => ({ shift: 0, low: 1, high: 1 }))
  return { wrap: cells(), pull: cells() }
}

/** Applies a correction to remaining times (seconds from now), in the logarithm of time. */
export function correctTimes(
  correction: Correction,
  target: Target,
  coreC: number,
  times: ReachTimes,
): ReachTimes {
  const cell = correction[target][cellOf(coreC, times.p50)] ?? { shift: 0, low: 1, high: 1 }
  const { low, high } = halves(times)
  const move = cell.shift >= 0 ? cell.shift * high : cell.shift * low
  const p50 = times.p50 * Math.exp(move)
  const below = low * cell.low
  const above = high * cell.high
  // The quarters keep the place that they had between the median and the ends.
  const inner = (part: number, whole: number) => (whole > 0 ? Math.min(1, Math.max(0.2, part / whole)) : 0.53)
  const lowPlace = inner(Math.log(times.p50 / times.p25), Math.log(times.p50 / times.p10))
  const highPlace = inner(Math.log(times.p75 / times.p50), Math.log(times.p90 / times.p50))
  return {
    p10: Math.min(p50, p50 * Math.exp(-below)),
    p25: Math.min(p50, p50 * Math.exp(-below * lowPlace)),
    p50,
    p75: Math.max(p50, p50 * Math.exp(above * highPlace)),
    p90: Math.max(p50, p50 * Math.exp(above)),
  }
}

/**
 * Split conformal correction by whole cooks (Vovk 2005; Lei et al. 2018): signed scores of past forecasts in units of
 * their own half-widths, their tenth and ninetieth percentiles with the finite-sample rank taken from the number of
 * cooks, not of moments, which hang together. A cell with few cooks leans on its part, the part on the whole, the
 * whole on the correction one came with.
 */
export function learnCorrection(
  past: Record<Target, readonly PastForecast[]>,
  general: Correction,
): Correction {
  return { wrap: learnTarget(past.wrap, general.wrap), pull: learnTarget(past.pull, general.pull) }
}

function learnTarget(past: readonly PastForecast[], general: readonly CorrectionCell[]): CorrectionCell[] {
  const scores = past
    .filter(({ times, truthS }) => Number.isFinite(times.p90) && times.p50 > 0 && truthS > 0)
    .map((forecast) => {
      const { low, high } = halves(forecast.times)
      const off = Math.log(forecast.truthS / forecast.times.p50)
      return {
        cook: forecast.cook,
        cell: cellOf(forecast.coreC, forecast.times.p50),
        score: off < 0 ? off / low : off / high,
      }
    })
  const perPart = horizonsS.length + 1
  const whole = cellFrom(scores)
  const generalWhole = meanCell(general)
  const cooks = new Set(scores.map(({ cook }) => cook)).size
  const cells = Array.from({ length: cellCount }, (_, index) => {
    const part = Math.floor(index / perPart)
    const ofPart = scores.filter(({ cell }) => Math.floor(cell / perPart) === part)
    const ofCell = scores.filter(({ cell }) => cell === index)
    const houseWhole = mixCells(whole, cooks, generalWhole, generalWorth)
    const partGeneral = scaleCell(general[index] ?? generalWhole, generalWhole, houseWhole)
    const partCell = mixCells(cellFrom(ofPart), cooksIn(ofPart), partGeneral, poolWorth)
    return mixCells(cellFrom(ofCell), cooksIn(ofCell), partCell, poolWorth)
  })
  return levelled(cells, scores, cooks)
}

/**
 * Leaning on wider pools leaves the whole a little too wide or too narrow. One factor for each side brings the share of
 * past times beyond the bound back to one in ten, as far as the number of cooks bears it out.
 */
function levelled(
  cells: readonly CorrectionCell[],
  scores: readonly Score[],
  cooks: number,
): CorrectionCell[] {
  if (scores.length === 0) return [...cells]
  const needed = (side: 'low' | 'high') => {
    const sorted = Float64Array.from(scores, ({ cell, score }) => {
      const { shift, [side]: bound } = cells[cell] ?? { shift: 0, low: 1, high: 1 }
      return (side === 'high' ? score - shift : shift - score) / bound
    }).sort()
    const rank = conformalRank(sorted.length, Math.min(1, (0.9 * (cooks + 1)) / cooks))
    return Math.max(0.3, at(sorted, rank - 1)) ** (cooks / (cooks + generalWorth))
  }
  const low = needed('low')
  const high = needed('high')
  return cells.map((cell) => ({ shift: cell.shift, low: cell.low * low, high: cell.high * high }))
}

interface Score {
  cook: string
  cell: number
  score: number
}

const cooksIn = (scores: readonly Score[]) => new Set(scores.map(({ cook }) => cook)).size

function cellFrom(scores: readonly Score[]): CorrectionCell {
  if (scores.length === 0) return { shift: 0, low: 1, high: 1 }
  const sorted = Float64Array.from(scores, ({ score }) => score).sort()
  const cooks = cooksIn(scores)
  const share = Math.min(1, (0.9 * (cooks + 1)) / cooks)
  const shift = 0.6 * at(sorted, sorted.length >> 1)
  const high = at(sorted, conformalRank(sorted.length, share) - 1)
  const low = at(sorted, sorted.length - conformalRank(sorted.length, share))
  return { shift, low: Math.max(0.05, shift - low), high: Math.max(0.05, high - shift) }
}

/** The rank of the smallest score that at least this share of `count` scores does not exceed, from 1. */
function conformalRank(count: number, share: number): number {
  return Math.min(count, Math.max(1, Math.ceil(share * count)))
}

function mixCells(own: CorrectionCell, cooks: number, wider: CorrectionCell, worth: number): CorrectionCell {
  const share = cooks / (cooks + worth)
  const geometric = (a: number, b: number) => Math.exp(share * Math.log(a) + (1 - share) * Math.log(b))
  return {
    shift: share * own.shift + (1 - share) * wider.shift,
    low: geometric(own.low, wider.low),
    high: geometric(own.high, wider.high),
  }
}

/** A general cell moved by as much as the house's whole differs from the general whole. */
function scaleCell(
  cell: CorrectionCell,
  generalWhole: CorrectionCell,
  houseWhole: CorrectionCell,
): CorrectionCell {
  return {
    shift: cell.shift + houseWhole.shift - generalWhole.shift,
    low: (cell.low * houseWhole.low) / generalWhole.low,
    high: (cell.high * houseWhole.high) / generalWhole.high,
  }
}

function meanCell(cells: readonly CorrectionCell[]): CorrectionCell {
  const n = Math.max(1, cells.length)
  const mean = (pick: (cell: CorrectionCell) => number) =>
    cells.reduce((sum, cell) => sum + pick(cell), 0) / n
  return {
    shift: mean(({ shift }) => shift),
    low: Math.exp(mean(({ low }) => Math.log(low))),
    high: Math.exp(mean(({ high }) => Math.log(high))),
  }
}

function cellOf(coreC: number, horizonS: number): number {
  const horizon = horizonsS.findIndex((border) => horizonS < border)
  return cookPartOf(coreC) * (horizonsS.length + 1) + (horizon < 0 ? horizonsS.length : horizon)
}

function halves(times: ReachTimes): { low: number; high: number } {
  const least = Math.log(1 + leastHalfS / times.p50)
  return {
    low: Math.max(least, Math.log(times.p50 / Math.max(1, times.p10))),
    high: Math.max(least, Math.log(Math.max(times.p50, times.p90) / times.p50)),
  }
}
