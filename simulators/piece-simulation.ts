import type { WrapMethod } from '#shared/domain/cooking.ts'

import { conductionGrid, conductionStep, type ConductionGrid } from './physics/conduction.ts'
import { vapourPressurePa } from './physics/humidity-ratio.ts'
import { juiceGivenUp } from './physics/juice.ts'
import type { PieceTraits } from './physics/piece-traits.ts'
import { balanceFace, type FaceBalance } from './physics/surface-balance.ts'
import { wraps, type FaceCover } from './physics/wraps.ts'

/** The air round a piece. */
export interface PieceSurroundings {
  airC: number
  /** kg of vapour per kg of dry air. */
  humidityRatio: number
  /** Convection on a bare face, W/m²K. */
  film: number
  pressurePa: number
}

/** One piece of meat, heated and cooled by what is round it. Seconds run from its start. */
export interface PieceSimulation {
  /** Carries the piece on; the last part of a step that fills no inner step of 10 s is kept for the next. */
  step(stepS: number, around: PieceSurroundings): void
  /** Covers the piece, or bares it again with `none`. */
  wrap(method: WrapMethod): void
  /** Wets the surface, kg/m² of water. */
  spritz(kgPerM2?: number): void
  readonly elapsedS: number
  readonly wrapped: WrapMethod
  /** At the probe's tip. */
  readonly coreC: number
  /** Of the upper face. */
  readonly surfaceC: number
  readonly massKg: number
  /** Water left as vapour so far, kg. */
  readonly evaporatedKg: number
}

/** The inner step: every result is the same however the outer steps are cut. */
export const INNER_STEP_S = 10

/** Layers through the thickness; the reference tests show what that is worth. */
export const LAYERS = 16

/**
 * Simulates a slab of meat with two faces: conduction inside; convection, radiation and evaporation outside;
 * the juice that heated layers give up feeds the faces until it is used up, and then they dry.
 *
 * Limits: thickness and conductivity stay as they were while the piece shrinks; heat for melting fat and
 * collagen is left out; the two ends are counted in the faces' area.
 */
export function createPieceSimulation(options: { traits: PieceTraits; startCoreC: number }): PieceSimulation {
  const { traits, startCoreC } = options
  const grid = conductionGrid({ shape: 'slab', extentM: traits.thicknessM, cells: LAYERS })
  const layers = new Float64Array(LAYERS).fill(startCoreC)
  const released = new Float64Array(LAYERS)
  const meatPerLayer = traits.trimmedKg / LAYERS
  const lower = createFace(startCoreC, traits.surfaceWater)
  const upper = createFace(startCoreC, traits.surfaceWater)
  let method: WrapMethod = 'none'
  let elapsedS = 0
  let owedS = 0
  let evaporatedKg = 0
  let lostKg = 0
  let fatShare = 0

  const inside = (2 * traits.conductivity) / grid.spacingM
  // One object for both faces and all steps: the inner step allocates nothing.
  const met = { airC: 0, film: 0, emissivity: 0, vapourPa: 0, wetness: 0, vapourFilm: 0 }

  const innerStep = (around: PieceSurroundings) => {
    const juiceKg = giveUpJuice(layers, released, traits, meatPerLayer)
    lostKg += juiceKg * traits.runsOff
    met.airC = around.airC + traits.placeC
    met.vapourPa = vapourPressurePa(around.humidityRatio, around.pressurePa)
    met.vapourFilm = around.film * traits.draft
    const top = layers[LAYERS - 1] ?? 0
    faceStep(lower, wraps[method].lower, traits.wetness * traits.lowerWetness, layers[0] ?? 0, juiceKg)
    faceStep(upper, wraps[method].upper, traits.wetness, top, juiceKg)
    conductionStep(grid, layers, traits, INNER_STEP_S, lower.balance, upper.balance)
    // Fat melts with the hottest half of the piece and does not come back.
    fatShare = Math.max(fatShare, Math.min(1, ((layers[4] ?? 0) - 50) / 40))
    elapsedS += INNER_STEP_S
  }

  const faceStep = (face: Face, cover: FaceCover, fullWetness: number, layerC: number, juiceKg: number) => {
    face.waiting += (juiceKg * (1 - traits.runsOff)) / 2 / traits.areaM2
    // Juice on its way out seeps to the surface with a delay of its own.
    const seeping = (face.waiting * INNER_STEP_S) / SEEP_S
    face.waiting -= seeping
    face.water += seeping
    const passes = method === 'none' ? 1 : Math.min(1, cover.evaporation * traits.wrapLooseness)
    met.film = met.vapourFilm * cover.heat
    met.emissivity = EMISSIVITY * cover.heat
    met.wetness = (passes * fullWetness * face.water) / (face.water + HALF_WET)
    balanceFace(face.balance, met, layerC, inside)
    const gone = Math.min(face.water, face.balance.evaporation * INNER_STEP_S)
    face.water -= gone
    evaporatedKg += gone * traits.areaM2
    const excess = Math.max(0, face.water - MOST_WATER)
    face.water -= excess
    lostKg += excess * traits.areaM2
  }

  return {
    step(stepS, around) {
      owedS += stepS
      while (owedS >= INNER_STEP_S - 1e-9) {
        innerStep(around)
        owedS -= INNER_STEP_S
      }
    },
    wrap: (next) => {
      method = next
    },
    spritz: (kgPerM2 = 0.08) => {
      upper.water += kgPerM2
    },
    get elapsedS() {
      return elapsedS
    },
    get wrapped() {
      return method
    },
    get coreC() {
      return temperatureAt(grid, layers, traits.probeDepth)
    },
    get surfaceC() {
      return upper.balance.surfaceC
    },
    get massKg() {
      const fatKg = traits.trimmedKg * traits.renderedFat * fatShare
      return traits.trimmedKg - evaporatedKg - lostKg - fatKg
    },
    get evaporatedKg() {
      return evaporatedKg
    },
  }
}

interface Face {
  balance: FaceBalance
  /** Water on the face, kg/m². */
  water: number
  /** Juice on its way to the face, kg/m². */
  waiting: number
}

function createFace(surfaceC: number, water: number): Face {
  return { balance: { surfaceC, evaporation: 0, conductance: 0, drivingC: surfaceC }, water, waiting: 0 }
}

/** Lets every layer give up juice towards its temperature's share; the sum in kg over the inner step. */
function giveUpJuice(
  layers: Float64Array,
  released: Float64Array,
  traits: PieceTraits,
  meatPerLayer: number,
): number {
  let sum = 0
  for (let layer = 0; layer < LAYERS; layer++) {
    const owed = juiceGivenUp(layers[layer] ?? 0) - (released[layer] ?? 0)
    if (owed <= 0) continue
    const given = (owed * INNER_STEP_S) / traits.releaseS
    released[layer] = (released[layer] ?? 0) + given
    sum += given
  }
  return sum * meatPerLayer * traits.looseWater
}

function temperatureAt(grid: ConductionGrid, layers: Float64Array, depth: number): number {
  const position = depth * grid.cells - 0.5
  const below = Math.max(0, Math.min(grid.cells - 2, Math.floor(position)))
  const share = position - below
  return (layers[below] ?? 0) * (1 - share) + (layers[below + 1] ?? 0) * share
}

/** Meat and bark are nearly black to long waves. */
const EMISSIVITY = 0.9
/** Delay with which given-up juice reaches a face, s. */
const SEEP_S = 5400
/** Water at which a face is half as wet as it can be, kg/m². */
const HALF_WET = 0.15
/** More water than this runs off, kg/m². */
const MOST_WATER = 1.5
