import { at } from './small-matrix.ts'

/**
 * The split conformal bound: the ⌈(n+1)(1−α)⌉-th smallest residual, infinite where n is too small for α.
 * Vovk 2005; Lei et al. 2018.
 *
 * @throws where α is not strictly between 0 and 1.
 */
export function conformalBound(residuals: ArrayLike<number>, alpha: number): number {
  if (!(alpha > 0 && alpha < 1)) throw new RangeError('α lies between 0 and 1')
  const sorted = Float64Array.from(residuals).sort()
  const rank = Math.ceil((sorted.length + 1) * (1 - alpha) - 1e-9)
  return rank > sorted.length ? Infinity : at(sorted, rank - 1)
}

/** Pinball (quantile) loss of saying q for the share τ when y came. Its unit is that of y. */
export function pinballLoss(y: number, q: number, tau: number): number {
  return Math.max(tau * (y - q), (tau - 1) * (y - q))
}
