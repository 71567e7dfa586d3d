import { at } from './small-matrix.ts'

/**
 * The state model of one piece. Four equal layers from the surface to the core pass heat to each other, the pit heats
 * the surface, and evaporation cools it as long as there is water. What evaporation follows is not the same in every
 * pit, so that there are two laws, and the fit weighs them by how well each explains the readings:
 *
 * - `juice`: the sink is switched on by the meat's own temperature, as its proteins shrink and give up juice;
 * - `vapour`: the sink follows the vapour pressure of water at the surface, above that of the pit's air.
 *
 * Both weaken as the water is used up, and a wrap cuts them.
 */
export const evaporationLaws = ['juice', 'vapour'] as const
export type EvaporationLaw = (typeof evaporationLaws)[number]

/** The parameters' order in a vector. Rates are natural logarithms of 1/h, temperatures °C. */
export const pieceParameters = [
  /** ln of the rate at which heat passes from layer to layer, 1/h. */
  'conduction',
  /** ln of the rate at which the pit heats the surface layer, 1/h. */
  'transfer',
  /** ln of how much faster than a layer the probe's place follows. */
  'core',
  /** The meat's temperature when it went on, °C. */
  'start',
  /** ln of the sink at full strength, K/h of the surface layer; for `vapour` at a surface of 65 °C in dry air. */
  'sink',
  /** ln of the water to evaporate, in K of the surface layer. */
  'water',
  /** ln of the power by which the sink weakens with the share of water left. */
  'drying',
  /** `juice`: the temperature at which the meat gives up its juice; `vapour`: the dew point of the pit, °C. */
  'threshold',
  /** ln of the share of the sink that is left under this piece's wrap. */
  'wrapCut',
  /** ln of the factor on the heat's way from the pit to the surface under the wrap. */
  'wrapTransfer',
] as const
export const parameterCount = pieceParameters.length

/** Steps for numerical derivatives, in each parameter's unit. */
export const parameterSteps = Float64Array.of(1e-4, 1e-4, 1e-4, 1e-3, 1e-4, 1e-4, 1e-4, 1e-3, 1e-4, 1e-4)

/** The model's inner step, seconds. */
export const modelStepS = 600

/** Rates in the form that the inner loop wants. */
export interface PieceRates {
  vapour: boolean
  conduction: number
  transfer: number
  core: number
  startC: number
  sink: number
  water: number
  drying: number
  thresholdC: number
  thresholdPressure: number
  wrapCut: number
  wrapTransfer: number
}

/** Surface, two inner layers, core in °C, and the share of water left. */
export type PieceState = Float64Array

const referencePressure = vapourPressure(65)
const releaseWidthC = 3
const sinkBeforeRelease = 0.1

/** Reads a parameter vector. Out of all bounds means a useless but finite model, so that a fit can step back. */
export function ratesOf(law: EvaporationLaw, parameters: ArrayLike<number>): PieceRates {
  const thresholdC = Math.min(120, Math.max(-20, at(parameters, 7)))
  return {
    vapour: law === 'vapour',
    conduction: positive(parameters, 0),
    transfer: positive(parameters, 1),
    core: positive(parameters, 2),
    startC: at(parameters, 3),
    sink: positive(parameters, 4),
    water: positive(parameters, 5),
    drying: positive(parameters, 6),
    thresholdC,
    thresholdPressure: vapourPressure(thresholdC),
    wrapCut: Math.min(1.5, positive(parameters, 8)),
    wrapTransfer: positive(parameters, 9),
  }
}

function positive(parameters: ArrayLike<number>, index: number): number {
  return Math.exp(Math.min(12, Math.max(-12, at(parameters, index))))
}

/** A piece as it goes on. */
export function initialState(rates: PieceRates): PieceState {
  return Float64Array.of(rates.startC, rates.startC, rates.startC, rates.startC, 1)
}

/**
 * One implicit Euler step of the four layers, the sink's vapour pressure linearised about the surface, then the water.
 * Stable at any rate; its error over five minutes is far below a probe's.
 *
 * @param wrapShare share of the step during which the piece was wrapped, 0 to 1.
 */
export function stepPiece(
  state: PieceState,
  rates: PieceRates,
  pitC: number,
  wrapShare: number,
  hours: number,
): void {
  const surface = at(state, 0)
  const left = at(state, 4)
  const conduction = rates.conduction * hours
  const coupling = conduction * rates.core
  const transfer = rates.transfer * hours * (1 + wrapShare * (rates.wrapTransfer - 1))
  const strength =
    left > 0 ? rates.sink * hours * left ** rates.drying * (1 + wrapShare * (rates.wrapCut - 1)) : 0

  let sink: number
  let slope = 0
  if (rates.vapour) {
    const pressure = vapourPressure(surface)
    const excess = pressure - rates.thresholdPressure
    if (excess > 0) {
      sink = (strength * excess) / referencePressure
      slope = (strength * pressure * 4283.77) / ((surface + 243.04) * (surface + 243.04)) / referencePressure
    } else sink = 0
  } else {
    const meat = (surface + at(state, 1) + at(state, 2) + at(state, 3)) / 4
    const given = 1 / (1 + Math.exp((rates.thresholdC - meat) / releaseWidthC))
    sink = strength * (sinkBeforeRelease + (1 - sinkBeforeRelease) * given)
  }

  // Thomas's elimination of the tridiagonal system, from the core outwards.
  const coreDiagonal = 1 + coupling
  const coreRatio = coupling / coreDiagonal
  const coreRest = at(state, 3) / coreDiagonal
  const thirdDiagonal = 1 + 2 * conduction - conduction * coreRatio
  const thirdRatio = conduction / thirdDiagonal
  const thirdRest = (at(state, 2) + conduction * coreRest) / thirdDiagonal
  const secondDiagonal = 1 + 2 * conduction - conduction * thirdRatio
  const secondRatio = conduction / secondDiagonal
  const secondRest = (at(state, 1) + conduction * thirdRest) / secondDiagonal
  const newSurface =
    (surface + transfer * pitC - sink + slope * surface + conduction * secondRest) /
    (1 + transfer + slope + conduction - conduction * secondRatio)
  const second = secondRest + secondRatio * newSurface
  const third = thirdRest + thirdRatio * second
  const evaporated = Math.max(0, sink + slope * (newSurface - surface))
  state[0] = newSurface
  state[1] = second
  state[2] = third
  state[3] = coreRest + coreRatio * third
  state[4] = Math.max(0, left - evaporated / rates.water)
}

/** Saturation pressure of water, Pa, at °C: Magnus form (from memory; within 0.5 % from 0 to 100 °C). */
export function vapourPressure(celsius: number): number {
  return 610.94 * Math.exp((17.625 * celsius) / (celsius + 243.04))
}
