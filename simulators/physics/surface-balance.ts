import { saturationPressurePa, saturationSlopePerK } from './saturation-pressure.ts'

/** What a face meets: air and walls in °C, the film's h in W/m²K, the air's vapour in Pa. */
export interface FaceSurroundings {
  airC: number
  film: number
  /** Share of a black body's exchange with walls at the air's temperature, wraps included. */
  emissivity: number
  vapourPa: number
  /** Share of the face that evaporates as open water would, wraps included: 0 is dry. */
  wetness: number
  /** The film's h for the vapour, W/m²K: that of the bare face, a wrap being counted in the wetness. */
  vapourFilm: number
}

/** A face's state: its temperature °C, its evaporation kg/m²s, and the exchange linearised there. */
export interface FaceBalance {
  surfaceC: number
  evaporation: number
  /** W/m²K, at least zero. */
  conductance: number
  drivingC: number
}

/** Latent heat of water near 70 °C, J/kg. */
export const LATENT_HEAT = 2.33e6

/**
 * Balances one face: convection, radiation and evaporation against conduction to the first layer inside, and
 * linearises the exchange about the face's temperature so that the conduction step can take it implicitly.
 *
 * Evaporation by the Chilton–Colburn analogy: h/(ρ·cp·Le^⅔) times the difference in vapour density. Newton's
 * method from the last surface temperature; two steps suffice at steps of seconds. Where the air holds more
 * vapour than the cold surface, the flux turns round and dew forms on the whole face.
 * Limits: no Stefan flow, a grey surface that sees only the pit's walls.
 */
export function balanceFace(
  face: FaceBalance,
  around: FaceSurroundings,
  layerC: number,
  inside: number,
): void {
  let surfaceC = face.surfaceC
  let slope = 0
  for (let iteration = 0; iteration < 2; iteration++) {
    const surfaceK = surfaceC + 273.15
    const wallK = around.airC + 273.15
    const saturationPa = saturationPressurePa(surfaceC)
    const share = saturationPa > around.vapourPa ? around.wetness : Math.min(1, around.wetness * 4)
    const transfer = share * around.vapourFilm * VAPOUR_PER_FILM
    face.evaporation = transfer * (saturationPa - around.vapourPa)
    const exchange =
      around.film * (around.airC - surfaceC) +
      around.emissivity *
        STEFAN_BOLTZMANN *
        (wallK * wallK + surfaceK * surfaceK) *
        (wallK + surfaceK) *
        (wallK - surfaceK) -
      LATENT_HEAT * face.evaporation
    slope =
      around.film +
      4 * around.emissivity * STEFAN_BOLTZMANN * surfaceK * surfaceK * surfaceK +
      LATENT_HEAT * transfer * saturationPa * saturationSlopePerK(surfaceC)
    surfaceC += (exchange - inside * (surfaceC - layerC)) / (slope + inside)
  }
  face.surfaceC = surfaceC
  face.conductance = slope
  // The exchange at the new temperature, to first order, is what the layer gets: drive it from there.
  face.drivingC = surfaceC + (inside * (surfaceC - layerC)) / slope
}

const STEFAN_BOLTZMANN = 5.670374e-8

/**
 * kg/(m²·s·Pa) for each W/m²K: M/(R·T) / (ρ·cp·Le^⅔) with M 0.018 kg/mol, T 365 K, ρ 0.97 kg/m³,
 * cp 1015 J/kgK and Lewis number 0.85.
 */
const VAPOUR_PER_FILM = 0.018015 / (8.31446 * 365) / (0.97 * 1015 * 0.85 ** (2 / 3))
