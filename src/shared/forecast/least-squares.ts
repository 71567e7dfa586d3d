import { at, cholesky, solveCholesky } from './small-matrix.ts'

/** A normal prior on the parameters: its mean and the inverse of its covariance. */
export interface NormalPrior {
  mean: Float64Array
  precision: Float64Array
}

export interface LeastSquaresProblem {
  /** Writes the residuals at these parameters, in units of their standard deviation. */
  residuals: (parameters: Float64Array, out: Float64Array) => void
  count: number
  start: ArrayLike<number>
  prior?: NormalPrior
  /** Degrees of freedom of a Student-t loss; left out, the loss is the plain square. */
  studentFreedom?: number
  /** Step of the numerical derivative for each parameter; left out, 1e-6 of its size. */
  steps?: ArrayLike<number>
  /** Parameters that the residuals do not depend on this time: only the prior moves them. */
  idle?: readonly number[]
  /** Central differences are twice the work and far more exact. */
  central?: boolean
  maxIterations?: number
  /** Stops when the cost falls by less than this share. */
  tolerance?: number
  /** Damping to begin with: small where the start is good, as under a prior; left out, the cautious 100. */
  damping?: number
}

export interface LeastSquaresFit {
  parameters: Float64Array
  residuals: Float64Array
  /** Cholesky factor of the curvature JᵀWJ + prior precision: the inverse of the posterior covariance. */
  curvature: Float64Array
  /** Minus the logarithm of the posterior, up to a constant that does not depend on the parameters. */
  cost: number
  iterations: number
}

const leastGain = 0.1

/**
 * Non-linear least squares by Levenberg and Marquardt's method, with an optional normal prior (then the result is
 * the maximum a posteriori) and an optional Student-t loss by iterated weights. The damping is
 * scaled by the largest diagonal of the curvature met so far (Moré 1978), so that a direction that has gone flat does
 * not run away; damping times 4 on a failed step, over 5 on a good one.
 * Marquardt 1963; Lange, Little and Taylor 1989 for the weights (both from memory). Checked against NIST StRD.
 *
 * @throws where the residuals at the start are not finite.
 */
export function leastSquares(problem: LeastSquaresProblem): LeastSquaresFit {
  const { count, prior, studentFreedom, maxIterations = 200, tolerance = 1e-14 } = problem
  const size = problem.start.length
  const jacobian = new Float64Array(count * size)
  const ahead = new Float64Array(count)
  const behind = new Float64Array(count)
  let parameters = Float64Array.from(problem.start)
  let residuals = new Float64Array(count)
  problem.residuals(parameters, residuals)
  let cost = costOf(residuals, parameters, prior, studentFreedom)
  if (!Number.isFinite(cost)) throw new Error('the residuals at the start are not finite')

  const trialResiduals = new Float64Array(count)
  let damping = problem.damping ?? 100
  const scale = new Float64Array(size)
  let iterations = 0
  for (; iterations < maxIterations; iterations++) {
    derive()
    const { curvature, gradient } = normalEquations(jacobian, residuals, parameters, prior, studentFreedom)
    for (let i = 0; i < size; i++) scale[i] = Math.max(at(scale, i), at(curvature, i * size + i))
    let accepted = false
    let fall = 0
    for (let attempt = 0; attempt < 12 && !accepted; attempt++) {
      const damped = curvature.slice()
      for (let i = 0; i < size; i++)
        damped[i * size + i] = at(curvature, i * size + i) + damping * at(scale, i) + 1e-300
      const factor = cholesky(damped, size)
      if (factor) {
        const step = solveCholesky(factor, gradient, size)
        const trial = parameters.map((value, i) => value - at(step, i))
        problem.residuals(trial, trialResiduals)
        const trialCost = costOf(trialResiduals, trial, prior, studentFreedom)
        // The fall that the local curvature promised; a step that gains far less than that has left where it holds.
        let promised = 0
        for (let i = 0; i < size; i++) {
          promised += 0.5 * at(step, i) * (at(gradient, i) + damping * at(scale, i) * at(step, i))
        }
        if (trialCost <= cost && cost - trialCost >= leastGain * promised) {
          accepted = true
          fall = cost - trialCost
          parameters = trial
          residuals = trialResiduals.slice()
          cost = trialCost
        }
      }
      damping = accepted ? Math.max(damping / 5, 1e-12) : damping * 4
    }
    if (!accepted || fall <= tolerance * Math.abs(cost)) break
  }
  // The curvature is taken where the last step began: by then the steps are far smaller than the uncertainty.
  const { curvature } = normalEquations(jacobian, residuals, parameters, prior, studentFreedom)
  const factor = cholesky(curvature, size) ?? diagonalFactor(curvature, size)
  return { parameters, residuals, curvature: factor, cost, iterations }

  function derive() {
    const moved = parameters.slice()
    for (let j = 0; j < size; j++) {
      if (problem.idle?.includes(j)) continue
      const value = at(parameters, j)
      const step = problem.steps ? at(problem.steps, j) : 1e-6 * Math.max(Math.abs(value), 1e-12)
      moved[j] = value + step
      problem.residuals(moved, ahead)
      if (problem.central) {
        moved[j] = value - step
        problem.residuals(moved, behind)
      }
      const span = problem.central ? 2 * step : step
      const base = problem.central ? behind : residuals
      for (let i = 0; i < count; i++) jacobian[i * size + j] = (at(ahead, i) - at(base, i)) / span
      moved[j] = value
    }
  }
}

function costOf(
  residuals: Float64Array,
  parameters: Float64Array,
  prior?: NormalPrior,
  freedom?: number,
): number {
  let cost = 0
  for (const z of residuals) {
    cost += freedom === undefined ? (z * z) / 2 : ((freedom + 1) / 2) * Math.log1p((z * z) / freedom)
  }
  if (!prior) return cost
  const size = parameters.length
  for (let i = 0; i < size; i++) {
    const di = at(parameters, i) - at(prior.mean, i)
    for (let j = 0; j < size; j++) {
      cost += 0.5 * di * at(prior.precision, i * size + j) * (at(parameters, j) - at(prior.mean, j))
    }
  }
  return cost
}

function normalEquations(
  jacobian: Float64Array,
  residuals: Float64Array,
  parameters: Float64Array,
  prior?: NormalPrior,
  freedom?: number,
) {
  const size = parameters.length
  const curvature = new Float64Array(size * size)
  const gradient = new Float64Array(size)
  for (let i = 0; i < residuals.length; i++) {
    const z = at(residuals, i)
    const weight = freedom === undefined ? 1 : (freedom + 1) / (freedom + z * z)
    const row = i * size
    for (let j = 0; j < size; j++) {
      const scaled = weight * at(jacobian, row + j)
      if (scaled === 0) continue
      gradient[j] = at(gradient, j) + scaled * z
      for (let k = 0; k <= j; k++) {
        curvature[j * size + k] = at(curvature, j * size + k) + scaled * at(jacobian, row + k)
      }
    }
  }
  for (let j = 0; j < size; j++) {
    for (let k = 0; k < j; k++) curvature[k * size + j] = at(curvature, j * size + k)
  }
  if (prior) {
    for (let j = 0; j < size; j++) {
      for (let k = 0; k < size; k++) {
        const precision = at(prior.precision, j * size + k)
        curvature[j * size + k] = at(curvature, j * size + k) + precision
        gradient[j] = at(gradient, j) + precision * (at(parameters, k) - at(prior.mean, k))
      }
    }
  }
  return { curvature, gradient }
}

/** A factor that ignores the couplings, for the rare curvature that rounding has made indefinite. */
function diagonalFactor(curvature: Float64Array, size: number): Float64Array {
  const factor = new Float64Array(size * size)
  for (let i = 0; i < size; i++)
    factor[i * size + i] = Math.sqrt(Math.max(at(curvature, i * size + i), 1e-12))
  return factor
}
