import type { Phase, WrapMethod } from './cooking.ts'
import { nextActions, type PieceStanding } from './next-actions.ts'

/** The next thing to do with a piece, as a page's title says it. */
export interface NextStep {
  kind: 'wrap' | 'pull' | 'rest' | 'hold'
  /** The piece, by the name the crew says. */
  subject: string
  /** The full minute in which it is due, or has been since; ms since 1970 UTC. */
  at: number
}

/** As much of a piece as that needs. */
interface StepPiece {
  id: number
  label: string
  cookerId: number | null
  stage: PieceStanding['stage']
  wrapMethod: WrapMethod
  pulledAt: string | null
  restAt: string | null
}
type Reach = { p10: string; p50: string; p90: string } | null
interface StepForecast {
  pieceId: number
  madeAt: string
  phase: Phase
  wrap: Reach
  wrapReachedAt: string | null
  pull: Reach
}

const minuteMs = 60_000

/** What is to be done first with any of these pieces; null when there is nothing yet. `now` in ms since 1970 UTC. */
export function nextStep(
  pieces: Iterable<StepPiece>,
  forecasts: ReadonlyMap<number, StepForecast>,
  now: number,
): NextStep | null {
  const standings = Array.from(pieces, (piece): PieceStanding => {
    const { pulledAt, restAt, ...same } = piece
    const forecast = forecasts.get(piece.id)
    return {
      ...same,
      pulledAt: moment(pulledAt),
      restAt: moment(restAt),
      pullReachedAt: null,
      forecast: forecast
        ? {
            madeAt: Date.parse(forecast.madeAt),
            phase: forecast.phase,
            wrap: moments(forecast.wrap),
            wrapReachedAt: moment(forecast.wrapReachedAt),
            pull: moments(forecast.pull),
          }
        : null,
    }
  })
  const [first] = nextActions({ now, pieces: standings, cookers: [], silent: [] })
  if (!first || first.kind === 'tend-pit' || first.kind === 'check-probe') return null
  return { kind: first.kind, subject: first.subject, at: Math.floor(first.at / minuteMs) * minuteMs }
}

function moment(text: string | null): number | null {
  return text === null ? null : Date.parse(text)
}

function moments(reach: Reach) {
  return reach && { p10: Date.parse(reach.p10), p50: Date.parse(reach.p50), p90: Date.parse(reach.p90) }
}
