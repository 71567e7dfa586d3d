/** Dense symmetric matrices of a dozen rows or so, row after row in one Float64Array. */

/**
 * Cholesky factor L (lower, A = L·Lᵀ) of a symmetric positive definite matrix, or undefined where it is not one.
 * Golub and Van Loan, Matrix Computations, algorithm 4.2.1 (from memory).
 */
export function cholesky(a: Float64Array, n: number): Float64Array | undefined {
  const l = new Float64Array(n * n)
  for (let j = 0; j < n; j++) {
    let diagonal = at(a, j * n + j)
    for (let k = 0; k < j; k++) diagonal -= at(l, j * n + k) ** 2
    if (!(diagonal > 0)) return undefined
    const root = Math.sqrt(diagonal)
    l[j * n + j] = root
    for (let i = j + 1; i < n; i++) {
      let sum = at(a, i * n + j)
      for (let k = 0; k < j; k++) sum -= at(l, i * n + k) * at(l, j * n + k)
      l[i * n + j] = sum / root
    }
  }
  return l
}

/** Solves L·Lᵀ·x = b. */
export function solveCholesky(l: Float64Array, b: Float64Array, n: number): Float64Array {
  const y = new Float64Array(n)
  for (let i = 0; i < n; i++) {
    let sum = at(b, i)
    for (let k = 0; k < i; k++) sum -= at(l, i * n + k) * at(y, k)
    y[i] = sum / at(l, i * n + i)
  }
  return solveTransposed(l, y, n)
}

/** Solves Lᵀ·x = b: with b standard normal, x has the covariance (L·Lᵀ)⁻¹. */
export function solveTransposed(l: Float64Array, b: Float64Array, n: number): Float64Array {
  const x = new Float64Array(n)
  for (let i = n - 1; i >= 0; i--) {
    let sum = at(b, i)
    for (let k = i + 1; k < n; k++) sum -= at(l, k * n + i) * at(x, k)
    x[i] = sum / at(l, i * n + i)
  }
  return x
}

/** The inverse of L·Lᵀ. */
export function invertCholesky(l: Float64Array, n: number): Float64Array {
  const inverse = new Float64Array(n * n)
  const unit = new Float64Array(n)
  for (let j = 0; j < n; j++) {
    unit.fill(0)
    unit[j] = 1
    const column = solveCholesky(l, unit, n)
    for (let i = 0; i < n; i++) inverse[i * n + j] = at(column, i)
  }
  return inverse
}

/** The natural logarithm of the determinant of L·Lᵀ. */
export function logDeterminant(l: Float64Array, n: number): number {
  let sum = 0
  for (let i = 0; i < n; i++) sum += Math.log(at(l, i * n + i))
  return 2 * sum
}

/** An element that is known to be there; typed arrays give undefined only outside their bounds. */
export function at(array: ArrayLike<number>, index: number): number {
  return array[index] ?? Number.NaN
}
