import { fitPiece } from './fit-piece.ts'
import type { LawPrior } from './house-model.ts'
import { evaporationLaws, parameterCount, type EvaporationLaw } from './piece-model.ts'
import type { PreparedCook } from './prepare-cook.ts'
import { priorOf, readyPrior, regressorsOf } from './prior.ts'
import { at, cholesky, invertCholesky, solveCholesky } from './small-matrix.ts'
import type { CookFacts } from './types.ts'

/** A finished cook on the model's grid. */
export interface LearnedCook {
  facts: CookFacts
  cook: PreparedCook
}

export interface PriorLearning {
  rounds?: number
  /** How many cooks of this house the general constant is worth, and the general slopes. */
  constantWorth?: number
  slopeWorth?: number
  covarianceWorth?: number
  /** The model's own error is never believed to be smaller than this, K. */
  leastMisfitC?: number
}

/**
 * Learns the laws' priors from finished cooks by empirical Bayes: every cook is fitted under the present prior, then
 * the prior's regression and covariance are fitted to the posteriors (means and their own uncertainties), shrunk
 * towards the prior one came with; a few rounds. Dempster, Laird and Rubin's expectation and maximisation with
 * Laplace's approximation. What a cook says nothing about (the wrap of one that was not wrapped) stays with the prior.
 */
export function learnPriors(
  cooks: readonly LearnedCook[],
  general: Record<EvaporationLaw, LawPrior>,
  {
    rounds = 4,
    constantWorth = 4,
    slopeWorth = 30,
    covarianceWorth = 15,
    leastMisfitC = 0.25,
  }: PriorLearning = {},
): Record<EvaporationLaw, LawPrior> {
  let present = general
  const starts: Partial<Record<EvaporationLaw, Float64Array>>[] = cooks.map(() => ({}))
  for (let round = 0; round < rounds && cooks.length > 0; round++) {
    const ready = { juice: readyPrior(present.juice), vapour: readyPrior(present.vapour) }
    const posteriors = cooks.map(({ facts, cook }, i) => {
      const x = regressorsOf(facts, cook.wrappedWith ?? facts.wrapMethod)
      const fits = evaporationLaws.map((law) => {
        const start = starts[i]?.[law]
        const fit = fitPiece(law, ready[law], cook, x, { maxIterations: 25, ...(start ? { start } : {}) })
        const kept = starts[i]
        if (kept) kept[law] = fit.parameters
        return fit
      })
      const scores = fits.map((fit) => 0.5 * fit.logEvidence + Math.log(ready[fit.law].law.share))
      const best = Math.max(...scores)
      const whole = scores.reduce((sum, score) => sum + Math.exp(score - best), 0)
      return {
        x,
        fits: fits.map((fit, j) => ({ fit, weight: Math.exp((scores[j] ?? best) - best) / whole })),
      }
    })
    const learned = evaporationLaws.map((law, j) => {
      const cases = posteriors.flatMap(({ x, fits }) => {
        const entry = fits[j]
        return entry ? [{ x, ...entry }] : []
      })
      return maximise(law, cases, general[law], present[law], {
        constantWorth,
        slopeWorth,
        covarianceWorth,
        leastMisfitC,
      })
    })
    const [juice, vapour] = learned
    if (!juice || !vapour) throw new Error('there are two laws')
    present = { juice, vapour }
  }
  return present
}

interface PosteriorCase {
  x: Float64Array
  fit: { parameters: Float64Array; curvature: Float64Array; residuals: Float64Array }
  weight: number
}

function maximise(
  law: EvaporationLaw,
  cases: readonly PosteriorCase[],
  general: LawPrior,
  present: LawPrior,
  worth: Required<Omit<PriorLearning, 'rounds'>>,
): LawPrior {
  // A law that few pieces follow still learns a little from all of them.
  const weights = cases.map(({ weight }) => 0.15 + 0.85 * weight)
  const size = general.coefficients[0]?.length ?? 0
  const normal = new Float64Array(size * size)
  for (let k = 0; k < size; k++) normal[k * size + k] = k === 0 ? worth.constantWorth : worth.slopeWorth * 0.3
  cases.forEach(({ x }, i) => {
    for (let k = 0; k < size; k++) {
      for (let l = 0; l < size; l++)
        normal[k * size + l] = at(normal, k * size + l) + at(weights, i) * at(x, k) * at(x, l)
    }
  })
  const factor = cholesky(normal, size)
  if (!factor) throw new Error('the regression of a prior is singular')
  const coefficients = general.coefficients.map((row, j) => {
    const right = new Float64Array(size)
    cases.forEach(({ x, fit }, i) => {
      const mean = row.reduce((sum, coefficient, k) => sum + coefficient * at(x, k), 0)
      const excess = at(weights, i) * (at(fit.parameters, j) - mean)
      for (let k = 0; k < size; k++) right[k] = at(right, k) + excess * at(x, k)
    })
    const moved = solveCholesky(factor, right, size)
    return row.map((coefficient, k) => coefficient + at(moved, k))
  })
  return {
    share: (2 * general.share + cases.reduce((sum, { weight }) => sum + weight, 0)) / (2 + cases.length),
    misfitC: misfitOf(cases, general, present, worth.leastMisfitC),
    coefficients,
    covariance: covarianceOf(law, cases, weights, { ...general, coefficients }, worth.covarianceWorth),
  }
}

function covarianceOf(
  _law: EvaporationLaw,
  cases: readonly PosteriorCase[],
  weights: readonly number[],
  prior: LawPrior,
  generalWorth: number,
): number[][] {
  const sum = Float64Array.from(prior.covariance.flat(), (value) => generalWorth * value)
  let whole = generalWorth
  const ready = readyPrior(prior)
  cases.forEach(({ x, fit }, i) => {
    const { mean } = priorOf(ready, x)
    const own = invertCholesky(fit.curvature, parameterCount)
    const weight = at(weights, i)
    whole += weight
    for (let j = 0; j < parameterCount; j++) {
      for (let k = 0; k < parameterCount; k++) {
        const distance = (at(fit.parameters, j) - at(mean, j)) * (at(fit.parameters, k) - at(mean, k))
        sum[j * parameterCount + k] =
          at(sum, j * parameterCount + k) + weight * (distance + at(own, j * parameterCount + k))
      }
    }
  })
  return Array.from({ length: parameterCount }, (_, j) =>
    Array.from({ length: parameterCount }, (_, k) => at(sum, j * parameterCount + k) / whole),
  )
}

/** The model's own error: whitened residuals of about unit size mean that it is right. Robust: from the middle half. */
function misfitOf(
  cases: readonly PosteriorCase[],
  general: LawPrior,
  present: LawPrior,
  leastC: number,
): number {
  const sizes: number[] = []
  for (const { fit, weight } of cases) {
    if (weight < 0.3) continue
    const absolute = fit.residuals.map(Math.abs).sort()
    sizes.push(at(absolute, absolute.length >> 1))
  }
  if (sizes.length === 0) return general.misfitC
  sizes.sort((a, b) => a - b)
  // The median size of a standard normal is 0.6745; of a Student t with four degrees of freedom 0.741.
  const factor = at(sizes, sizes.length >> 1) / 0.72
  const learned = present.misfitC * Math.min(1.6, Math.max(0.6, factor))
  const share = cases.length / (cases.length + 5)
  return Math.min(3, Math.max(leastC, general.misfitC + (learned - general.misfitC) * share))
}
