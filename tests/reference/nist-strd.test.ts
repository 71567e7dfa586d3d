import { describe, expect, it } from 'vitest'
import { leastSquares } from '#shared/forecast/least-squares.ts'

/**
 * NIST Statistical Reference Datasets, nonlinear regression: Misra1a, BoxBOD and Rat42, data, starts and certified
 * values as published by NIST. The regression under the forecast has to find them from both starts to six digits.
 */
interface Reference {
  name: string
  model: (b: Float64Array, x: number) => number
  starts: number[][]
  certified: number[]
  squares: number
  data: [y: number, x: number][]
}

const saturating = (b: Float64Array, x: number) => (b[0] ?? NaN) * (1 - Math.exp(-(b[1] ?? NaN) * x))

const references: Reference[] = [
  {
    name: 'Misra1a',
    model: saturating,
    starts: [
      [500, 1e-4],
      [250, 5e-4],
    ],
    certified: [238.94212918, 5.5015643181e-4],
    squares: 0.12455138894,
    data: [
      [10.07, 77.6],
      [14.73, 114.9],
      [17.94, 141.1],
      [23.93, 190.8],
      [29.61, 239.9],
      [35.18, 289.0],
      [40.02, 332.8],
      [44.82, 378.4],
      [50.76, 434.8],
      [55.05, 477.3],
      [61.01, 536.8],
      [66.4, 593.1],
      [75.47, 689.1],
      [81.78, 760.0],
    ],
  },
  {
    name: 'BoxBOD',
    model: saturating,
    starts: [
      [1, 1],
      [100, 0.75],
    ],
    certified: [213.80940889, 0.54723748542],
    squares: 1168.0088766,
    data: [
      [109, 1],
      [149, 2],
      [149, 3],
      [191, 5],
      [213, 7],
      [224, 10],
    ],
  },
  {
    name: 'Rat42',
    model: (b, x) => (b[0] ?? NaN) / (1 + Math.exp((b[1] ?? NaN) - (b[2] ?? NaN) * x)),
    starts: [
      [100, 1, 0.1],
      [75, 2.5, 0.07],
    ],
    certified: [72.462237576, 2.6180768402, 0.067359200066],
    squares: 8.0565229338,
    data: [
      [8.93, 9],
      [10.8, 14],
      [18.59, 21],
      [22.33, 28],
      [39.35, 42],
      [56.11, 57],
      [61.73, 63],
      [64.62, 70],
      [67.08, 79],
    ],
  },
]

describe.each(references)('NIST StRD $name', ({ model, starts, certified, squares, data }) => {
  it.each(starts.map((start) => ({ start })))('is found from $start', ({ start }) => {
    const fit = leastSquares({
      residuals: (b, out) => {
        data.forEach(([y, x], i) => {
          out[i] = y - model(b, x)
        })
      },
      count: data.length,
      start,
      central: true,
    })
    certified.forEach((value, i) => {
      expect(Math.abs((fit.parameters[i] ?? NaN) / value - 1)).toBeLessThan(5e-7)
    })
    const sum = fit.residuals.reduce((total, residual) => total + residual * residual, 0)
    expect(Math.abs(sum / squares - 1)).toBeLessThan(1e-8)
  })
})

/**
 * Rumford's cooling of a cannon bored blunt (1798): data published, the fit of k computed for 60 + 70·e^(−kt), °F and
 * minutes.
 */
it('fits the cooling cannon', () => {
  const minutes = [4, 5, 7, 12, 14, 16, 20, 24, 28, 31, 34, 37.5, 41]
  const fahrenheit = [126, 125, 123, 120, 119, 118, 116, 115, 114, 113, 112, 111, 110]
  const fit = leastSquares({
    residuals: (b, out) => {
      minutes.forEach((t, i) => {
        out[i] = (fahrenheit[i] ?? NaN) - (60 + 70 * Math.exp(-(b[0] ?? NaN) * t))
      })
    },
    count: minutes.length,
    start: [0.02],
    central: true,
  })
  expect(fit.parameters[0]).toBeCloseTo(0.0094155, 7)
})
