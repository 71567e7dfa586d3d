import { describe, expect, it } from 'vitest'

import { conductionGrid, conductionStep, faceTemperature } from '../../simulators/physics/conduction.ts'

/** Runs a body from one temperature in surroundings of another; the slab's two faces are alike. */
function run(options: {
  shape: 'slab' | 'cylinder' | 'sphere'
  extentM: number
  conductivity: number
  heatCapacity: number
  film: number
  startC: number
  aroundC: number
  seconds: number
  cells: number
  stepS?: number
}) {
  const { shape, extentM, cells, stepS = 10 } = options
  const grid = conductionGrid({ shape, extentM, cells })
  const temperatures = new Float64Array(cells).fill(options.startC)
  const around = { conductance: options.film, drivingC: options.aroundC }
  const insulated = { conductance: 0, drivingC: 0 }
  for (let elapsed = 0; elapsed < options.seconds; elapsed += stepS) {
    const inner = shape === 'slab' ? around : insulated
    conductionStep(grid, temperatures, options, Math.min(stepS, options.seconds - elapsed), inner, around)
  }
  const middle = shape === 'slab' ? cells / 2 : 0
  const [near, far] = [temperatures[middle] ?? NaN, temperatures[middle + 1] ?? NaN]
  // The profile is symmetric about the centre: the parabola through the layers half and one and a half
  // spacings away gives the value on the axis.
  const centreC = near - (far - near) / 8
  const surfaceC = faceTemperature(grid, temperatures[cells - 1] ?? NaN, options, around)
  return { centreC, surfaceC }
}

/** 4 °C into 121.11 °C, h 20, k 0.47, diffusivity 0.13e-6. */
const beef = { conductivity: 0.47, heatCapacity: 0.47 / 0.13e-6, film: 20, startC: 4, aroundC: 121.11 }

describe('conduction against published and computed values', () => {
  it('cools the steak of Çengel’s worked example (Heat and Mass Transfer) to 1.99 °C at its surface', () => {
    const { surfaceC } = run({
      shape: 'slab',
      extentM: 0.02,
      conductivity: 0.45,
      heatCapacity: 0.45 / 0.91e-7,
      film: 9,
      startC: 25,
      aroundC: -11,
      seconds: 5590,
      cells: 16,
    })
    // Published: about 2 °C; the full series gives 1.99 °C.
    expect(Math.abs(surfaceC - 1.99)).toBeLessThan(0.02)
  })

  it('brings the centre of Kreith’s 1.5 kg roast, a sphere, to 77 °C after 132.8 min', () => {
    const radius = (1.5 / 1000 / ((4 / 3) * Math.PI)) ** (1 / 3)
    const centreAfter = (minutes: number) =>
      run({
        shape: 'sphere',
        extentM: radius,
        conductivity: 0.5,
        heatCapacity: 1000 * 4000,
        film: 18,
        startC: 20,
        aroundC: 163,
        seconds: minutes * 60,
        cells: 40,
      }).centreC
    // Published: 134 min by the one-term solution; the full series 132.8 min.
    expect(centreAfter(132.3)).toBeLessThan(77)
    expect(centreAfter(133.3)).toBeGreaterThan(77)
  })

  // Full series, computed: half-thickness 4 cm, radius 5 cm.
  it.each([
    { hours: 1, slab: 21.55, surface: 68.82, cylinder: 26.71 },
    { hours: 2, slab: 47.59, surface: 83.09, cylinder: 62.62 },
    { hours: 4, slab: 81.46, surface: 100.62, cylinder: 99.44 },
    { hours: 6, slab: 99.74, surface: 110.06, cylinder: 113.09 },
  ])('follows the full series of slab and cylinder after $hours h', ({ hours, slab, surface, cylinder }) => {
    const seconds = hours * 3600
    const flat = run({ ...beef, shape: 'slab', extentM: 0.08, seconds, cells: 40 })
    expect(Math.abs(flat.centreC - slab)).toBeLessThan(0.03)
    expect(Math.abs(flat.surfaceC - surface)).toBeLessThan(0.03)
    const round = run({ ...beef, shape: 'cylinder', extentM: 0.05, seconds, cells: 40 })
    expect(Math.abs(round.centreC - cylinder)).toBeLessThan(0.05)
  })

  it('stays within 0.15 °C of the series with the sixteen layers and the step of the simulators', () => {
    for (const [hours, slab] of [
      [1, 21.55],
      [2, 47.59],
      [4, 81.46],
      [6, 99.74],
    ] as const) {
      const { centreC } = run({ ...beef, shape: 'slab', extentM: 0.08, seconds: hours * 3600, cells: 16 })
      expect(Math.abs(centreC - slab)).toBeLessThan(0.15)
    }
  })

  // One-term coefficients, Çengel, Heat and Mass Transfer, table 4-2: decay rate λ₁² and centre amplitude A₁.
  it.each([
    { biot: 0.1, slab: [0.3111, 1.0161], cylinder: [0.4417, 1.0246] },
    { biot: 0.5, slab: [0.6533, 1.0701], cylinder: [0.9408, 1.1143] },
    { biot: 1, slab: [0.8603, 1.1191], cylinder: [1.2558, 1.2071] },
    { biot: 2, slab: [1.0769, 1.1785], cylinder: [1.5995, 1.3384] },
    { biot: 5, slab: [1.3138, 1.2403], cylinder: [1.9898, 1.5029] },
    { biot: 10, slab: [1.4289, 1.262], cylinder: [2.1795, 1.5677] },
  ])('decays as the one-term solution says at Biot number $biot', ({ biot, slab, cylinder }) => {
    for (const [shape, [lambda, amplitude]] of [
      ['slab', slab],
      ['cylinder', cylinder],
    ] as const) {
      if (lambda === undefined || amplitude === undefined) throw new Error('incomplete row')
      // Unit half-thickness, conductivity and heat capacity: seconds are Fourier numbers.
      const body = {
        conductivity: 1,
        heatCapacity: 1,
        film: biot,
        startC: 1,
        aroundC: 0,
        cells: 80,
        stepS: 0.002,
      }
      const fourier = 0.6
      const { centreC } = run({ ...body, shape, extentM: shape === 'slab' ? 2 : 1, seconds: fourier })
      const published = amplitude * Math.exp(-(lambda ** 2) * fourier)
      expect(Math.abs(centreC / published - 1)).toBeLessThan(0.003)
    }
  })

  it('keeps its heat when both faces are insulated', () => {
    const grid = conductionGrid({ shape: 'slab', extentM: 0.08, cells: 4 })
    const temperatures = Float64Array.of(10, 20, 60, 70)
    const insulated = { conductance: 0, drivingC: 500 }
    for (let step = 0; step < 5000; step++) {
      conductionStep(grid, temperatures, beef, 60, insulated, insulated)
    }
    for (const temperature of temperatures) expect(temperature).toBeCloseTo(40, 3)
  })

  it('refuses a body without extent', () => {
    expect(() => conductionGrid({ shape: 'slab', extentM: 0, cells: 16 })).toThrow(RangeError)
  })
})
