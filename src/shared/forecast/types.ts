import type { CookerKind, Phase, WrapMethod } from '../domain/cooking.ts'

/** What is known about a piece before it goes on. Temperatures in °C, mass in kg. */
export interface CookFacts {
  /** Seeds the random draws, so that the same readings give the same forecast. */
  id: string
  recipe: string
  cured: boolean
  rawKg: number
  cookerKind: CookerKind
  pitSetC: number
  wrapAtC: number
  /** The planned wrap, known from the start; only an event says when it happened. */
  wrapMethod: WrapMethod
  pullAtC: number
}

/** What the crew did, in seconds since the piece went on. */
export type CookEvent =
  | { elapsedS: number; kind: 'wrap'; method?: WrapMethod }
  | { elapsedS: number; kind: 'pit_set'; pitSetC: number }

/** Readings in time order. A missing value is NaN. The three arrays have one length. */
export interface CookReadings {
  elapsedS: Float64Array
  pitC: Float64Array
  coreC: Float64Array
}

/** When a temperature will be reached, in seconds since the piece went on, as quantiles. */
export interface ReachTimes {
  p10: number
  p25: number
  p50: number
  p75: number
  p90: number
}

/** Why a time is not forecast. Never a bare number, never silence. */
export const noForecastReasons = [
  'too-little-data',
  'no-probe',
  'probe-suspect',
  'probe-silent',
  'pit-unknown',
  'will-not-reach',
  'already-pulled',
] as const
export type NoForecastReason = (typeof noForecastReasons)[number]

/** The core temperature's distribution at a coming moment, °C: one slice of the fan. */
export interface FanSlice {
  atS: number
  p10: number
  p25: number
  p50: number
  p75: number
  p90: number
}

/** What the model says of one piece at one moment. */
export interface Forecast {
  /** Seconds since the piece went on at which this was said. */
  atS: number
  phase: Phase
  /** Null once the wrap temperature was reached, or with a reason why there is no answer. */
  wrap: ReachTimes | null
  wrapReason?: NoForecastReason
  /** When the wrap temperature was first reached, if it was. */
  wrapReachedS?: number
  pull: ReachTimes | null
  pullReason?: NoForecastReason
  /** The core's coming course, from now to the late end of the pull; empty where there is no answer. */
  fan: FanSlice[]
}
