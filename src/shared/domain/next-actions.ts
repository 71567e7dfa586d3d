import type { PitState, Urgency } from './pit-state.ts'
import type { Phase, WrapMethod } from './cooking.ts'

/** What a hand can be needed for. */
export type NextActionKind = 'tend-pit' | 'check-probe' | 'wrap' | 'pull' | 'rest' | 'hold'

/** One thing to do. Times are ms since 1970 UTC. */
export interface NextAction {
  /** The same thing keeps its key from second to second. */
  key: string
  kind: NextActionKind
  /** The piece or cooker it is about, by the name the crew says. */
  subject: string
  /** The cooker where it is done, when the subject is a piece. */
  place: string | null
  pieceId: number | null
  cookerId: number | null
  /** When it is due; for what is due already, since when it has been. */
  at: number
  /** Due now, not a forecast. */
  dueNow: boolean
  /** 80 % lie between these; null for what is not a forecast. */
  early: number | null
  late: number | null
  /** Null for ordinary work that is not due yet. */
  urgency: Urgency | null
  /** What a pit that left its band, or is silent, looks like. */
  pit: PitState | null
}

/** A piece as far as its next steps need it. Moments in ms since 1970 UTC. */
export interface PieceStanding {
  id: number
  label: string
  cookerId: number | null
  stage: 'waiting' | 'cooking' | 'wrapped' | 'pulled' | 'resting' | 'holding' | 'done'
  wrapMethod: WrapMethod
  pulledAt: number | null
  restAt: number | null
  /** When its readings reached the pull temperature; null when they have not, or that is not known. */
  pullReachedAt: number | null
  forecast: PieceOutlook | null
}

/** The part of a forecast that next steps are made from. */
export interface PieceOutlook {
  madeAt: number
  phase: Phase
  wrap: { p10: number; p50: number; p90: number } | null
  wrapReachedAt: number | null
  pull: { p10: number; p50: number; p90: number } | null
}

/** A cooker and how its pit stands. */
export interface CookerStanding {
  id: number
  name: string
  pit: PitState
}

/** A probe or a whole device that went silent while something depends on it. */
export interface SilentSource {
  key: string
  name: string
  /** When it was last heard; null when never. */
  lastAt: number | null
  pieceId: number | null
  cookerId: number | null
}

/** How long a pulled piece rests before it goes into the holding cabinet: about an hour, common practice. */
export const usualRestMs = 60 * 60_000

/** Work that was reached and not done for this long asks for a hand now: common practice. */
export const overdueMs = 15 * 60_000

/**
 * Everything the crew has to do from `now` on, in time order: first what is due already (the most urgent first,
 * then the longest waiting), then what is forecast. A piece gives its next step only, never the one after.
 */
export function nextActions(night: {
  now: number
  pieces: readonly PieceStanding[]
  cookers: readonly CookerStanding[]
  silent: readonly SilentSource[]
}): NextAction[] {
  const nameOf = new Map(night.cookers.map((cooker) => [cooker.id, cooker.name]))
  const actions = [
    ...night.cookers.flatMap((cooker) => pitAction(cooker, night.now)),
    ...night.silent.map((source) => silentAction(source, night.now)),
    ...night.pieces.flatMap((piece) => {
      const place = piece.cookerId === null ? null : (nameOf.get(piece.cookerId) ?? null)
      return pieceAction(piece, place, night.now)
    }),
  ]
  return actions.sort(inTimeOrder)
}

function pitAction(cooker: CookerStanding, now: number): NextAction[] {
  const { pit } = cooker
  if (pit.kind !== 'below' && pit.kind !== 'above') return []
  return [
    {
      key: `pit-${cooker.id}`,
      kind: 'tend-pit',
      subject: cooker.name,
      place: null,
      pieceId: null,
      cookerId: cooker.id,
      at: now,
      dueNow: true,
      early: null,
      late: null,
      urgency: pit.urgency,
      pit,
    },
  ]
}

function silentAction(source: SilentSource, now: number): NextAction {
  return {
    key: `silent-${source.key}`,
    kind: 'check-probe',
    subject: source.name,
    place: null,
    pieceId: source.pieceId,
    cookerId: source.cookerId,
    at: source.lastAt ?? now,
    dueNow: true,
    early: null,
    late: null,
    urgency: 'soon',
    pit: { kind: 'silent', lastAt: source.lastAt },
  }
}

function pieceAction(piece: PieceStanding, place: string | null, now: number): NextAction[] {
  const due = (kind: NextActionKind, since: number) => [
    pieceDue(piece, place, kind, Math.min(since, now), now - since >= overdueMs ? 'now' : 'soon'),
  ]
  switch (piece.stage) {
    case 'waiting':
    case 'holding':
    case 'done':
      return []
    case 'pulled':
      return due('rest', piece.pulledAt ?? now)
    case 'resting': {
      const until = (piece.restAt ?? now) + usualRestMs
      return until <= now
        ? due('hold', until)
        : [{ ...pieceDue(piece, place, 'hold', until, null), dueNow: false }]
    }
    case 'cooking':
    case 'wrapped': {
      const outlook = piece.forecast
      if (outlook === null) return []
      if (outlook.phase === 'done') return due('pull', piece.pullReachedAt ?? outlook.madeAt)
      const toWrap = piece.stage === 'cooking' && piece.wrapMethod !== 'none'
      if (toWrap && outlook.wrapReachedAt !== null) return due('wrap', outlook.wrapReachedAt)
      const reach = toWrap ? outlook.wrap : outlook.pull
      if (reach === null) return []
      // A median that has slipped into the past is still a forecast: the temperature has not been reached.
      const forecast = pieceDue(piece, place, toWrap ? 'wrap' : 'pull', Math.max(reach.p50, now), null)
      return [{ ...forecast, dueNow: false, early: Math.max(reach.p10, now), late: Math.max(reach.p90, now) }]
    }
  }
}

function pieceDue(
  piece: PieceStanding,
  place: string | null,
  kind: NextActionKind,
  at: number,
  urgency: Urgency | null,
): NextAction {
  return {
    key: `${kind}-${piece.id}`,
    kind,
    subject: piece.label,
    place,
    pieceId: piece.id,
    cookerId: piece.cookerId,
    at,
    dueNow: true,
    early: null,
    late: null,
    urgency,
    pit: null,
  }
}

function inTimeOrder(one: NextAction, other: NextAction): number {
  if (one.dueNow !== other.dueNow) return one.dueNow ? -1 : 1
  if (one.dueNow) {
    const urgent = Number(other.urgency === 'now') - Number(one.urgency === 'now')
    if (urgent !== 0) return urgent
  }
  return one.at - other.at || one.key.localeCompare(other.key)
}
