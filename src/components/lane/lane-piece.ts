import type { LanePiece, Line, LinePoint, Reach } from '@/components/chart/lane-data.ts'
import type { LatestForecast, ReachInstants } from '@/shared/contract/forecast.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { ChannelTrace, Freshness, LatestValue } from '@/stores/live-types.ts'
import { serviceRisk } from './service-risk.ts'

/** What is known of a piece besides itself. */
export interface PieceSources {
  trace: Pick<ChannelTrace, 'at' | 'c'> | undefined
  latest: LatestValue | undefined
  freshness: Freshness | undefined
  now: number
  forecast: LatestForecast | undefined
  /** The name of the sibling it goes by. */
  follows: string | null
  /** The hour it is wanted for. */
  servesAt: number | null
}

/** A piece of the contract as a lane draws it. */
export function lanePiece(piece: Piece, sources: PieceSources): LanePiece {
  const { forecast, freshness, latest } = sources
  const onAt = moment(piece.onAt)
  const pull = reach(forecast?.pull ?? null)
  const cooking = piece.stage === 'cooking' || piece.stage === 'wrapped'
  return {
    id: piece.id,
    label: piece.label,
    stage: piece.stage,
    phase: forecast?.phase ?? null,
    wrapAtC: piece.wrapAtC,
    pullAtC: piece.pullAtC,
    line: lineFrom(sources.trace, onAt),
    probed: piece.channelId !== null,
    follows: piece.channelId === null ? sources.follows : null,
    latest: latest === undefined || (onAt !== null && latest.at < onAt) ? null : latest,
    silentSince: cooking && freshness?.stale === true ? silentSince(latest, onAt, sources.now) : null,
    fan: cooking ? (forecast?.fan ?? []).map((slice) => ({ ...slice, at: Date.parse(slice.at) })) : [],
    wrap: piece.stage === 'cooking' && piece.wrapMethod !== 'none' ? reach(forecast?.wrap ?? null) : null,
    pull: cooking ? pull : null,
    reason: cooking ? (forecast?.pullReason ?? null) : null,
    risk: cooking ? serviceRisk(pull, sources.servesAt) : null,
    pulledAt: moment(piece.pulledAt),
    restAt: moment(piece.restAt),
    holdAt: moment(piece.holdAt),
    doneAt: moment(piece.doneAt),
  }
}

/** A probe that was just put in is not silent yet: it is given this long to say something. */
export const firstWordMs = 2 * 60_000

/** Since when nothing was heard from a piece: before it went on, its probe had nothing to say of it. */
export function silentSince(
  latest: { at: number } | undefined,
  onAt: number | null,
  now: number,
): number | null {
  const since = Math.max(latest?.at ?? -Infinity, onAt ?? -Infinity)
  const waiting = onAt !== null && since === onAt && now - onAt < firstWordMs
  return Number.isFinite(since) && !waiting ? since : null
}

/** A channel's line, from the moment the piece went on: before that the probe was elsewhere. */
export function lineFrom(trace: Pick<ChannelTrace, 'at' | 'c'> | undefined, from: number | null): Line {
  if (trace === undefined) return []
  const points: LinePoint[] = []
  for (let i = 0; i < trace.at.length; i++) {
    const at = trace.at[i]
    if (at === undefined || (from !== null && at < from)) continue
    points.push([at, trace.c[i] ?? null])
  }
  return points
}

/** A moment of the contract in ms since 1970 UTC. */
export function moment(instant: string | null): number | null {
  return instant === null ? null : Date.parse(instant)
}

/** A forecast's quantiles in ms since 1970 UTC. */
export function reach(instants: ReachInstants | null): Reach | null {
  if (instants === null) return null
  const { p10, p50, p90 } = instants
  return { p10: Date.parse(p10), p50: Date.parse(p50), p90: Date.parse(p90) }
}
