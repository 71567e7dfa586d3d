import type { WrapMethod } from '../domain/cooking.ts'
import type { LawPrior } from './house-model.ts'
import type { NormalPrior } from './least-squares.ts'
import { parameterCount } from './piece-model.ts'
import { at, cholesky, invertCholesky, logDeterminant } from './small-matrix.ts'
import type { CookFacts } from './types.ts'

/** What a piece's parameters are regressed on. */
export const regressors = [
  'constant',
  'ln(kg / 6)',
  'cured',
  'offset',
  'rotisserie',
  '(set − 121 °C) / 14 K',
  'foil',
  'boat',
] as const

export function regressorsOf(facts: CookFacts, wrap: WrapMethod): Float64Array {
  return Float64Array.of(
    1,
    Math.log(Math.min(20, Math.max(0.3, facts.rawKg)) / 6),
    facts.cured ? 1 : 0,
    facts.cookerKind === 'offset' ? 1 : 0,
    facts.cookerKind === 'rotisserie' ? 1 : 0,
    (facts.pitSetC - 121) / 14,
    wrap === 'foil' ? 1 : 0,
    wrap === 'boat' ? 1 : 0,
  )
}

/** A law's prior made ready for many fits. */
export interface ReadyPrior {
  law: LawPrior
  precision: Float64Array
  logDetPrecision: number
}

/** Inverts a law's covariance once. @throws where it is not positive definite. */
export function readyPrior(law: LawPrior): ReadyPrior {
  const covariance = Float64Array.from(law.covariance.flat())
  const factor = cholesky(covariance, parameterCount)
  if (!factor) throw new Error('the covariance of a prior is not positive definite')
  return {
    law,
    precision: invertCholesky(factor, parameterCount),
    logDetPrecision: -logDeterminant(factor, parameterCount),
  }
}

/** The prior of one piece. */
export function priorOf(ready: ReadyPrior, x: Float64Array): NormalPrior {
  const mean = Float64Array.from(ready.law.coefficients, (row) =>
    row.reduce((sum, coefficient, i) => sum + coefficient * at(x, i), 0),
  )
  return { mean, precision: ready.precision }
}
