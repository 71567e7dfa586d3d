import { leastSquares } from './least-squares.ts'
import {
  initialState,
  modelStepS,
  parameterSteps,
  ratesOf,
  stepPiece,
  type EvaporationLaw,
  parameterCount,
} from './piece-model.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { priorOf, type ReadyPrior } from './prior.ts'
import { at, logDeterminant } from './small-matrix.ts'

/** Residuals of the model hang together over about this long, seconds. */
export const misfitTauS = 3600
/** What a single value of the cleaned series is good for, K. */
const readingC = 0.2
const studentFreedom = 4
const wrapParameters = [8, 9]

/** A law fitted to one piece. */
export interface PieceFit {
  law: EvaporationLaw
  parameters: Float64Array
  /** Cholesky factor of the inverse posterior covariance. */
  curvature: Float64Array
  /** Logarithm of the evidence for this law by Laplace's approximation, up to a constant common to all laws. */
  logEvidence: number
  /** Whitened residuals. */
  residuals: Float64Array
  iterations: number
}

/**
 * Fits one law to a piece's readings: maximum a posteriori with a Student-t loss. The model's error is taken as a
 * process that forgets within an hour (first-order autoregressive), so that sixty readings an hour do not count as
 * sixty independent ones; the residuals are whitened accordingly. With `forgetS` old readings count less, so that a
 * law that is a little wrong over the whole cook is right about where the piece stands now.
 */
export function fitPiece(
  law: EvaporationLaw,
  ready: ReadyPrior,
  cook: PreparedCook,
  regressors: Float64Array,
  options: { start?: ArrayLike<number>; maxIterations?: number; forgetS?: number } = {},
): PieceFit {
  const prior = priorOf(ready, regressors)
  const { timesS, coreC } = cook.core
  const count = timesS.length
  const modelled = new Float64Array(count)
  const misfit = ready.law.misfitC
  const spread = new Float64Array(count)
  const keep = new Float64Array(count)
  for (let i = 0; i < count; i++) {
    const kept = i === 0 ? 0 : Math.exp(-(at(timesS, i) - at(timesS, i - 1)) / misfitTauS)
    keep[i] = kept
    const faded = options.forgetS === undefined ? 1 : Math.exp((cook.atS - at(timesS, i)) / options.forgetS)
    spread[i] = faded * Math.sqrt(misfit ** 2 * (1 - kept ** 2) + readingC ** 2 * (1 + kept ** 2))
  }
  const residuals = (parameters: Float64Array, out: Float64Array) => {
    simulateCore(law, parameters, cook, modelled)
    let before = 0
    for (let i = 0; i < count; i++) {
      const error = at(coreC, i) - at(modelled, i)
      out[i] = (error - at(keep, i) * before) / at(spread, i)
      before = error
    }
  }
  const fit = leastSquares({
    residuals,
    count,
    start: options.start ?? prior.mean,
    prior,
    studentFreedom,
    steps: parameterSteps,
    // Before the wrap the readings say nothing about it.
    ...(cook.wrapS === undefined ? { idle: wrapParameters } : {}),
    maxIterations: options.maxIterations ?? 6,
    tolerance: 1e-4,
    damping: 1e-3,
  })
  let scale = 0
  for (let i = 0; i < count; i++) scale += Math.log(at(spread, i))
  return {
    law,
    parameters: fit.parameters,
    curvature: fit.curvature,
    logEvidence:
      -fit.cost - scale + 0.5 * (ready.logDetPrecision - logDeterminant(fit.curvature, parameterCount)),
    residuals: fit.residuals,
    iterations: fit.iterations,
  }
}

/** Writes the modelled core at each of the series' times, °C. */
export function simulateCore(
  law: EvaporationLaw,
  parameters: ArrayLike<number>,
  cook: PreparedCook,
  out: Float64Array,
): void {
  const rates = ratesOf(law, parameters)
  const state = initialState(rates)
  const { timesS } = cook.core
  const count = timesS.length
  const hours = modelStepS / 3600
  let next = 0
  for (let k = 0; next < count; k++) {
    const before = at(state, 3)
    const startS = k * modelStepS
    stepPiece(state, rates, at(cook.pitC, k), at(cook.wrapShare, k), hours)
    const after = at(state, 3)
    while (next < count && at(timesS, next) < startS + modelStepS) {
      out[next] = before + ((after - before) * (at(timesS, next) - startS)) / modelStepS
      next++
    }
  }
}
