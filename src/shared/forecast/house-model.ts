import type { CookerKind } from '../domain/cooking.ts'
import type { Correction } from './correction.ts'
import type { EvaporationLaw } from './piece-model.ts'
import type { SecondModel } from './second-model.ts'

/** What is known of pieces before their first reading, for one evaporation law. */
export interface LawPrior {
  /** How often pieces follow this law, 0 to 1. */
  share: number
  /** Size of the model's own error in the readings, K. */
  misfitC: number
  /** One row a parameter: its mean as a linear function of `regressorsOf(facts)`. */
  coefficients: number[][]
  /** Covariance of the parameters about that mean, row after row. */
  covariance: number[][]
}

/** How a kind of fire keeps its set. */
export interface PitHabit {
  /** Mean distance from the set, K. */
  biasC: number
  /** Spread of the half-hourly mean about a fire's own course, K. */
  sdC: number
  /** How long a distance lasts, seconds. */
  tauS: number
}

/** When the crew wraps, as past cooks showed it: each list a sample. */
export interface CrewHabit {
  /** Wrapped before the wrap temperature was reached: K below it. */
  earlyC: number[]
  /** Wrapped after it was reached: seconds later. */
  delaysS: number[]
  /** How many planned wraps never came. */
  never: number
}

/** Everything a house has learned; plain data that survives JSON. */
export interface HouseModel {
  version: 1
  /** Finished cooks behind it; 0 for the general model that ships with the product. */
  cooks: number
  laws: Record<EvaporationLaw, LawPrior>
  pits: Partial<Record<CookerKind, PitHabit>>
  crew: CrewHabit
  second?: SecondModel
  correction: Correction
}
