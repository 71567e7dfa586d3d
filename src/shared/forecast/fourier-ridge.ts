import { seededRandom } from '../domain/random.ts'
import { at, cholesky, solveCholesky } from './small-matrix.ts'

/** Kernel ridge regression by random Fourier features beside plain linear terms; plain data. */
export interface FourierRidge {
  seed: string
  waves: number
  /** Length of the kernel in standard deviations of the features. */
  length: number
  mean: number[]
  scale: number[]
  coefficients: number[]
}

export interface FourierRidgeOptions {
  seed: string
  waves?: number
  length?: number
  ridge?: number
}

/**
 * Ridge regression on standardised features, their squares' stead taken by cosines of random directions that together
 * make a Gaussian kernel (Rahimi and Recht 2007, from memory). The cost of a forecast does not grow with the history.
 */
export function fitFourierRidge(
  rows: readonly Float64Array[],
  goals: Float64Array,
  weights: Float64Array,
  { seed, waves = 160, length = 6, ridge = 0.01 }: FourierRidgeOptions,
): FourierRidge {
  const width = rows[0]?.length ?? 0
  const count = rows.length
  const whole = weights.reduce((sum, weight) => sum + weight, 0)
  const mean = Array.from(
    { length: width },
    (_, f) => rows.reduce((sum, row, i) => sum + at(weights, i) * at(row, f), 0) / whole,
  )
  const scale = Array.from({ length: width }, (_, f) => {
    const square =
      rows.reduce((sum, row, i) => sum + at(weights, i) * (at(row, f) - at(mean, f)) ** 2, 0) / whole
    return square > 1e-12 ? Math.sqrt(square) : 1
  })
  const shell: FourierRidge = { seed, waves, length, mean, scale, coefficients: [] }
  const basis = fourierBasis(shell)
  const size = basis.size
  const normal = new Float64Array(size * size)
  const right = new Float64Array(size)
  for (let i = 0; i < count; i++) {
    const x = basis.expand(rows[i] ?? new Float64Array(width))
    const weight = at(weights, i) / whole
    for (let j = 0; j < size; j++) {
      const scaled = weight * at(x, j)
      right[j] = at(right, j) + scaled * at(goals, i)
      for (let k = 0; k <= j; k++) normal[j * size + k] = at(normal, j * size + k) + scaled * at(x, k)
    }
  }
  for (let j = 0; j < size; j++) {
    normal[j * size + j] = at(normal, j * size + j) + (j === 0 ? 1e-9 : ridge)
    for (let k = 0; k < j; k++) normal[k * size + j] = at(normal, j * size + k)
  }
  const factor = cholesky(normal, size)
  if (!factor) throw new Error('the ridge regression is singular')
  return { ...shell, coefficients: Array.from(solveCholesky(factor, right, size)) }
}

/** Makes the predictor of a fitted model. */
export function fourierPredictor(model: FourierRidge): (row: Float64Array) => number {
  const basis = fourierBasis(model)
  return (row) => {
    const x = basis.expand(row)
    let sum = 0
    for (let j = 0; j < basis.size; j++) sum += at(x, j) * at(model.coefficients, j)
    return sum
  }
}

function fourierBasis({ seed, waves, length, mean, scale }: FourierRidge) {
  const width = mean.length
  const random = seededRandom('fourier', seed)
  const directions = Float64Array.from({ length: waves * width }, () => random.normal() / length)
  const phases = Float64Array.from({ length: waves }, () => 2 * Math.PI * random.uniform())
  const size = 1 + width + waves
  const height = Math.sqrt((2 * width) / waves)
  const x = new Float64Array(size)
  const standard = new Float64Array(width)
  return {
    size,
    /** The expanded row; the array is used again by the next call. */
    expand: (row: Float64Array) => {
      x[0] = 1
      for (let f = 0; f < width; f++) {
        // Far outside what was seen a feature says no more than at the border.
        const value = Math.min(3, Math.max(-3, (at(row, f) - at(mean, f)) / at(scale, f)))
        standard[f] = value
        x[1 + f] = value
      }
      for (let w = 0; w < waves; w++) {
        let phase = at(phases, w)
        for (let f = 0; f < width; f++) phase += at(directions, w * width + f) * at(standard, f)
        x[1 + width + w] = height * Math.cos(phase)
      }
      return x
    },
  }
}
