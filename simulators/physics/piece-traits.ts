import type { Random } from '#shared/domain/random.ts'

/** What was cut: it decides thickness and shape. */
export const cuts = ['packer', 'short-rib', 'cheek'] as const
export type Cut = (typeof cuts)[number]

/** What sets one piece apart from the next. SI units. */
export interface PieceTraits {
  cut: Cut
  cured: boolean
  rawKg: number
  /** After trimming, as it goes on. */
  trimmedKg: number
  thicknessM: number
  /** Of one face. */
  areaM2: number
  conductivity: number
  /** J/m³K. */
  heatCapacity: number
  /** Share of the bare, juicy upper face that evaporates as open water would. */
  wetness: number
  /** The lower (fat) side's wetness as a share of the upper's. */
  lowerWetness: number
  /** Loose water given up in the end, kg per kg of meat. */
  looseWater: number
  /** Time constant with which a heated layer gives its juice up, s. */
  releaseS: number
  /** Share of the juice that runs off instead of reaching a surface. */
  runsOff: number
  /** Water already on the surface when it goes on (rub, rinse, binder), kg/m². */
  surfaceWater: number
  /** The film as a share of the pit's usual one: the place on the grate. */
  draft: number
  /** The place's own departure from the pit's temperature, K. */
  placeC: number
  /** Depth of the probe's tip as a share of the thickness. */
  probeDepth: number
  /** How a wrap's leftover exchange compares with the usual: tight below 1, loose above. */
  wrapLooseness: number
  /** Fat that melts out in the end, kg per kg. */
  renderedFat: number
}

/** Draws one piece's traits. `rawKg` is the piece as received. */
export function drawPieceTraits(
  random: Random,
  options: { rawKg: number; cured: boolean; cut?: Cut },
): PieceTraits {
  const { rawKg, cured, cut = 'packer' } = options
  if (!(rawKg > 0)) throw new RangeError('A piece needs a mass.')
  const shape = shapes[cut]
  const spread = (sd: number) => Math.exp(sd * random.normal())
  const trimmedKg = rawKg * clamp(shape.trimmed + 0.03 * random.normal(), 0.6, 0.98)
  const thicknessM = shape.thicknessM * (rawKg / shape.usualKg) ** 0.36 * spread(0.055)
  return {
    cut,
    cured,
    rawKg,
    trimmedKg,
    thicknessM,
    areaM2: (trimmedKg / (DENSITY * thicknessM)) * shape.roughness,
    conductivity: 0.45 * spread(0.03),
    heatCapacity: DENSITY * 3400 * spread(0.025),
    // Salt holds the water in and firms the surface: a cured piece gives up less, and its face is drier.
    wetness: (cured ? 0.3 : 0.5) * spread(0.14),
    lowerWetness: clamp(0.7 + 0.15 * random.normal(), 0.3, 1),
    // Meat is little more than half water, and part of that stays bound whatever happens.
    looseWater: Math.min(0.39, (cured ? 0.2 : 0.32) * spread(0.17)),
    releaseS: 5400 * spread(0.25),
    runsOff: clamp(0.18 + 0.06 * random.normal(), 0.1, 0.6),
    surfaceWater: 0.25 * spread(0.3),
    draft: spread(0.08),
    placeC: 1.6 * random.normal(),
    probeDepth: clamp(0.5 + 0.05 * random.normal(), 0.38, 0.62),
    wrapLooseness: spread(0.25),
    renderedFat: clamp(0.08 + 0.02 * random.normal(), 0.04, 0.16),
  }
}

/** Usual mass and thickness by cut, common practice; roughness is the true face over the flat one. */
const shapes: Record<Cut, { usualKg: number; thicknessM: number; trimmed: number; roughness: number }> = {
  packer: { usualKg: 6.2, thicknessM: 0.086, trimmed: 0.83, roughness: 1.12 },
  'short-rib': { usualKg: 2.2, thicknessM: 0.07, trimmed: 0.93, roughness: 1.2 },
  cheek: { usualKg: 2.5, thicknessM: 0.058, trimmed: 0.8, roughness: 1.35 },
}

/** Beef, kg/m³: 1020 to 1090 in tables. */
const DENSITY = 1050

function clamp(value: number, low: number, high: number): number {
  return Math.min(high, Math.max(low, value))
}
