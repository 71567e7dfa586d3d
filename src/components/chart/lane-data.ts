import type { PieceStage } from '@/shared/contract/piece.ts'
import type { Phase } from '@/shared/domain/cooking.ts'
import type { PitBand, Urgency } from '@/shared/domain/pit-state.ts'
import type { NoForecastReason } from '@/shared/forecast/types.ts'

/** A point of a line: ms since 1970 UTC and °C; null is a gap. */
export type LinePoint = readonly [at: number, c: number | null]
export type Line = readonly LinePoint[]

/** The span of time a lane shows, ms since 1970 UTC. */
export interface TimeWindow {
  from: number
  to: number
  now: number
}

/** When a temperature will be reached, ms since 1970 UTC: 80 % lie between p10 and p90. */
export interface Reach {
  p10: number
  p50: number
  p90: number
}

/** The core's coming distribution at a moment: °C. */
export interface FanSlice {
  at: number
  p10: number
  p25: number
  p50: number
  p75: number
  p90: number
}

/** A piece as a lane draws it. Moments in ms since 1970 UTC, temperatures in °C. */
export interface LanePiece {
  id: number
  label: string
  stage: PieceStage
  phase: Phase | null
  wrapAtC: number
  pullAtC: number
  line: Line
  /** Whether a probe is in it. */
  probed: boolean
  /** The sibling a piece without a probe goes by. */
  follows: string | null
  /** Its newest reading, if it has a probe. */
  latest: { at: number; c: number } | null
  /** Since when its probe has been silent; null while it is heard, or has none. */
  silentSince: number | null
  fan: readonly FanSlice[]
  /** The coming wrap; null when done, not planned or not known. */
  wrap: Reach | null
  pull: Reach | null
  /** Why there is no time for the pull. */
  reason: NoForecastReason | null
  /** Whether the service hour is at risk. */
  risk: Urgency | null
  pulledAt: number | null
  restAt: number | null
  holdAt: number | null
  doneAt: number | null
}

/** Which band held from a moment on; null where it is not known, as for a cooker that is gone. */
export interface BandSpan {
  from: number
  band: PitBand | null
}

/** A pit as a lane draws it; on a piece's page the pits it stood in, one after the other. */
export interface LanePit {
  line: Line
  /** Oldest first. */
  bands: readonly BandSpan[]
  silentSince: number | null
}

export type LaneMarkKind = 'wrap' | 'pull' | 'spritz' | 'fire' | 'moved' | 'reseated' | 'note' | 'weighed'

/** Something that happened, or is forecast to. */
export interface LaneMark {
  kind: LaneMarkKind
  at: number
  /** The piece on whose line it stands; null for the fire, which belongs to the pit. */
  pieceId: number | null
}

export interface LaneData {
  window: TimeWindow
  /** Service hours that fall into the window. */
  services: readonly number[]
  /** Null when no probe stands for the pit. */
  pit: LanePit | null
  pieces: readonly LanePiece[]
  marks: readonly LaneMark[]
  /** True for a cook of the past: there is no now in it. */
  ended?: boolean
}

/** Puts words to a key of the person's language. */
export type Words = (key: string, values?: Record<string, string | number>) => string

/** How a chart puts values into words. Its times leave the day out: the axis over the lanes names it. */
export interface Say {
  words: Words
  temperature(c: number): string
  temperatureSpan(lowC: number, highC: number): string
  clock(at: number): string
  interval(from: number, to: number): string
  duration(ms: number): string
  /** Round temperatures of the person's unit for the scale of a large lane, °C. */
  levels: readonly number[]
}
