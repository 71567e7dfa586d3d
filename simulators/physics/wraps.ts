import type { WrapMethod } from '#shared/domain/cooking.ts'

/** What a wrap leaves of one face's exchange with the pit: 1 is a bare face. */
export interface FaceCover {
  evaporation: number
  /** Convection and radiation together. */
  heat: number
}

/**
 * How each wrap covers the upper and the lower face.
 * Common practice in words (foil stops evaporation nearly wholly, paper mostly, an open boat about half);
 * the figures are chosen so that simulated pieces push as long as the trade's do.
 */
export const wraps: Record<WrapMethod, { upper: FaceCover; lower: FaceCover }> = {
  none: { upper: { evaporation: 1, heat: 1 }, lower: { evaporation: 1, heat: 1 } },
  paper: { upper: { evaporation: 0.05, heat: 0.88 }, lower: { evaporation: 0.04, heat: 0.92 } },
  foil: { upper: { evaporation: 0.015, heat: 0.84 }, lower: { evaporation: 0.01, heat: 0.88 } },
  boat: { upper: { evaporation: 0.95, heat: 1 }, lower: { evaporation: 0.03, heat: 0.82 } },
}
