import type { LawPrior } from './house-model.ts'
import { regressors } from './prior.ts'

/**
 * Where the learning of the general prior starts: rates from conduction in a slab of half-thickness 5.6 cm in four
 * layers with beef's diffusivity and 15 W/m²K (see the check values), water as a few kilograms a square metre.
 */
export function firstPrior(law: 'juice' | 'vapour'): LawPrior {
  const constants = [
    Math.log(2.4),
    Math.log(1.1),
    0.3,
    5,
    Math.log(65),
    Math.log(220),
    Math.log(0.7),
    law === 'juice' ? 63 : 28,
    Math.log(0.3),
    Math.log(0.95),
  ]
  const kilograms = [-0.7, -0.35, 0, 0, 0, 0, 0, 0, 0, 0]
  const cured = [0, 0, 0, 0, -0.3, -0.6, 0, 0, 0, 0]
  const foil = [0, 0, 0, 0, 0, 0, 0, 0, -1.7, -0.05]
  const boat = [0, 0, 0, 0, 0, 0, 0, 0, 0.55, 0.02]
  const spreads = [0.25, 0.25, 0.3, 3, 0.3, 0.45, 0.4, law === 'juice' ? 4 : 8, 0.4, 0.1]
  return {
    share: 0.5,
    misfitC: 0.7,
    coefficients: constants.map((constant, j) => {
      const row: number[] = new Array<number>(regressors.length).fill(0)
      row[0] = constant
      row[1] = kilograms[j] ?? 0
      row[2] = cured[j] ?? 0
      row[6] = foil[j] ?? 0
      row[7] = boat[j] ?? 0
      return row
    }),
    covariance: spreads.map((spread, j) => spreads.map((_, k) => (j === k ? spread * spread : 0))),
  }
}
