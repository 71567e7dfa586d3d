import type { WrapMethod } from '#shared/domain/cooking.ts'
import type { Random } from '#shared/domain/random.ts'
import type { PieceLaw, TestHouse } from './house.ts'
import { saturationPa } from './moist-air.ts'

const cells = 12
const density = 1050
const latent = 2.35e6

/** A brisket of the test generator: finite volumes from core to surface with one of several evaporation laws. */
export interface TestPiece {
  /** One step of some seconds in a pit at a temperature. */
  step(seconds: number, pitC: number): void
  wrap(method: WrapMethod): void
  /** What a perfect probe reads, °C. */
  probeC(): number
}

/** Draws a piece and gives the means to cook it. */
export function drawPiece(
  random: Random,
  house: TestHouse,
  law: PieceLaw,
  rawKg: number,
  cured: boolean,
): TestPiece {
  const spread = (sd: number) => Math.exp(sd * house.variety * random.normal())
  const between = (low: number, high: number) => low + (high - low) * random.uniform()
  const halfThickness = 0.056 * (rawKg / 6) ** 0.36 * house.thickness * spread(0.1)
  // 0 is a slab, 1 a cylinder: a packer lies between.
  const shape = between(0.1, 0.6)
  const heatCapacity = density * 3400 * spread(0.03)
  const conductivity = 0.45 * spread(0.08)
  const transfer = 15 * house.transfer * spread(0.14)
  const startC = between(2, 9)
  const wetness = 0.17 * house.sink * spread(0.22) * (cured ? 0.7 : 1)
  const waterScale = house.water * spread(0.28) * (cured ? 0.5 : 1)
  const firstWater = 0.7 * waterScale
  const juice = 3.4 * waterScale
  const releaseC = (law === 'juice' ? between(60, 66) : between(52, 62)) + 2 * random.normal()
  const releaseWidth = between(2, 5)
  const sinkWatts = 830 * house.sink * spread(0.18) * (cured ? 0.75 : 1)
  const drying = between(0.35, 1)
  const humidity = house.humidityPa * spread(0.3)
  const probePlace = Math.floor(between(0, 3.4))
  const wrapSpread = spread(0.25)
  let cut = 1
  let transferCut = 1

  const edge = (i: number) => (i / cells) ** 1
  const area = new Float64Array(cells + 1)
  const volume = new Float64Array(cells)
  for (let i = 0; i <= cells; i++) area[i] = edge(i) ** shape
  for (let i = 0; i < cells; i++) {
    volume[i] = ((edge(i + 1) ** (shape + 1) - edge(i) ** (shape + 1)) / (shape + 1)) * halfThickness
  }
  const width = halfThickness / cells
  const t = new Float64Array(cells).fill(startC)
  let water = firstWater
  let released = 0
  let dried = 0

  const at = (array: Float64Array, i: number) => array[i] ?? 0
  const releasedShare = () => {
    let share = 0
    let whole = 0
    for (let i = 0; i < cells; i++) {
      share += at(volume, i) / (1 + Math.exp(-(at(t, i) - releaseC) / releaseWidth))
      whole += at(volume, i)
    }
    return share / whole
  }
  /** The sink in W/m² at this surface temperature. */
  const sink = (surfaceC: number, meatShare: number) => {
    if (law === 'vapour') {
      const wet = wetness * Math.min(1.5, water / (0.5 * waterScale))
      return cut * wet * transfer * 0.0147 * Math.max(0, saturationPa(surfaceC) - humidity)
    }
    if (law === 'juice') {
      const left = Math.max(0, 1 - dried / (4.3 * waterScale))
      return cut * sinkWatts * (0.12 + 0.88 * meatShare) * left ** drying
    }
    // A front that recedes under a drying crust, behind a growing resistance.
    const supply = 0.3 + 0.7 * meatShare
    const resistance = 1 + (4 * dried) / (3 * waterScale)
    return (
      (cut * 2.1 * wetness * supply * transfer * 0.0147 * Math.max(0, saturationPa(surfaceC) - humidity)) /
      resistance
    )
  }

  const inner = (seconds: number, pitC: number) => {
    const surface = at(t, cells - 1)
    const share = releasedShare()
    water += juice * Math.max(0, share - released)
    released = Math.max(released, share)
    const evaporation = sink(surface, share)
    const mass = (evaporation * seconds) / latent
    water = Math.max(0, water - mass)
    dried += mass
    let fluxIn = 0
    for (let i = 0; i < cells; i++) {
      const fluxOut =
        i === cells - 1
          ? -(transferCut * transfer * (pitC - surface) - evaporation)
          : ((at(t, i) - at(t, i + 1)) * conductivity * at(area, i + 1)) / width
      t[i] =
        at(t, i) +
        ((fluxIn - fluxOut * (i === cells - 1 ? at(area, cells) : 1)) * seconds) /
          (heatCapacity * at(volume, i))
      fluxIn = fluxOut
    }
  }

  return {
    step: (seconds, pitC) => {
      for (let left = seconds; left > 0; left -= 15) inner(Math.min(15, left), pitC)
    },
    wrap: (method) => {
      const plain = { none: 1, foil: 0.05, paper: 0.3, boat: 0.52 }[method]
      cut = Math.min(1, plain * wrapSpread)
      transferCut = { none: 1, foil: 0.9, paper: 0.95, boat: 0.97 }[method]
    },
    probeC: () => at(t, probePlace),
  }
}
