import type { EventFact, NewEvent } from '#shared/contract/event.ts'
import type { NewPiece, Piece } from '#shared/contract/piece.ts'
import type { Tonight } from '#shared/contract/site.ts'

import { fuelFedAt } from './physics/fuel-dip.ts'
import { pitKinds } from './physics/pit-kinds.ts'
import { drawCrewHabits } from './crew-habits.ts'
import { pitSeed } from './house-model.ts'
import type { LiveHouse, LivePiece } from './live/live-house.ts'
import type { SiteState } from './live/house-state.ts'
import { stableUuid } from './live/stable-uuid.ts'
import { freeProbe, isHoldingChannel } from './free-probe.ts'
import { planNight } from './night-plan.ts'
import { drawSlip } from './probe.ts'
import { pieceSeed } from './story.ts'

/** Something that a person of the crew does through the product. */
export type CrewAction =
  | { kind: 'log-on-piece'; pieceId: number; event: NewEvent }
  | { kind: 'log-on-cooker'; cookerId: number; event: NewEvent }
  | { kind: 'place-probe'; pieceId: number; channelId: number; at: string }
  | { kind: 'start-piece'; site: string; start: NewPiece }
  | { kind: 'add-service'; site: string; servesAt: string; portions: number; note: string }

/**
 * What the crew of a site does now, in the order in which it would: everything follows from what the API says and
 * from how the meat is, so that a crew that was away goes on where things stand, and does nothing that somebody has
 * done already. Ids are the same for the same act: sent twice it is logged once.
 */
export function decideCrew(options: {
  houseSeed: string
  state: SiteState
  house: LiveHouse
  nowMs: number
}): CrewAction[] {
  const { houseSeed, state, house, nowMs } = options
  const { tonight } = state
  const actions: CrewAction[] = []
  for (const piece of tonight.pieces) {
    actions.push(...decidePiece({ houseSeed, tonight, piece, live: house.piece(piece.id), nowMs }))
  }
  actions.push(...tendFires(houseSeed, tonight, nowMs))
  actions.push(...planNight({ houseSeed, state, nowMs }))
  return actions
}

interface PieceView {
  houseSeed: string
  tonight: Tonight
  piece: Piece
  live: LivePiece | undefined
  nowMs: number
}

function decidePiece(view: PieceView): CrewAction[] {
  const { houseSeed, piece, live, nowMs } = view
  if (piece.onAt === null || piece.stage === 'done') return []
  const onMs = Date.parse(piece.onAt)
  const log = (fact: EventFact, atMs = nowMs): CrewAction => ({
    kind: 'log-on-piece',
    pieceId: piece.id,
    event: {
      id: stableUuid(
        houseSeed,
        'crew',
        piece.id,
        fact.kind,
        'stage' in fact ? fact.stage : '',
        piece.version,
      ),
      happenedAt: new Date(atMs).toISOString(),
      fact,
    },
  })
  if (piece.pulledAt !== null) return afterThePull(view, log)
  // Left on by a crew that was away for a day: it is cleared away, not served.
  if (live === undefined || nowMs - onMs > TOO_LONG_MS) return [log({ kind: 'pull', by: 'feel' })]
  const seed = pieceSeed(houseSeed, piece)
  const habits = drawCrewHabits(seed)
  const ripeMs = live.whenReached(piece.wrapAtC, nowMs)
  const tenderMs = live.whenReached(piece.pullAtC, nowMs)
  if (tenderMs !== undefined && nowMs >= tenderMs + habits.pullDelayS * 1000) {
    return [log({ kind: 'pull', by: 'temperature' })]
  }
  if (isTimeToPullByFeel(view, live)) return [log({ kind: 'pull', by: 'feel' })]
  const { wrapMethod } = piece
  if (ripeMs !== undefined && piece.wrappedAt === null && wrapMethod !== 'none') {
    if (nowMs >= ripeMs + habits.wrapDelayS * 1000) return [log({ kind: 'wrap', method: wrapMethod })]
  }
  return [...spritz(view, habits.spritzS, ripeMs), ...reseat(view, seed, habits.reseatS)]
}

type Log = (fact: EventFact, atMs?: number) => CrewAction

function afterThePull({ houseSeed, tonight, piece, live, nowMs }: PieceView, log: Log): CrewAction[] {
  const pulledMs = Date.parse(piece.pulledAt ?? tonight.now)
  const habits = drawCrewHabits(pieceSeed(houseSeed, piece))
  const holding = tonight.cookers.find(({ kind }) => kind === 'holding')
  const tooLong = live === undefined || nowMs - Date.parse(piece.onAt ?? tonight.now) > TOO_LONG_MS
  const sliceMs = tooLong ? nowMs : (serviceMs({ tonight, piece }) ?? pulledMs + 3 * HOUR_MS)
  const restedMs = Date.parse(piece.restAt ?? piece.pulledAt ?? tonight.now)
  if (piece.restAt === null && piece.holdAt === null) {
    return tooLong || nowMs >= pulledMs + 3 * MINUTE_MS ? [log({ kind: 'rest' })] : []
  }
  if (tooLong || (nowMs >= sliceMs && nowMs >= restedMs + 25 * MINUTE_MS)) {
    const cookedKg = Math.round((live?.model.curve.massKg() ?? piece.rawKg * 0.5) * 100) / 100
    const weigh = (stage: 'cooked' | 'sliced', kg: number) => log({ kind: 'weighed', stage, kg })
    return [
      ...(piece.cookedKg === null ? [weigh('cooked', cookedKg)] : []),
      ...(piece.slicedKg === null ? [weigh('sliced', Math.round(cookedKg * 92) / 100)] : []),
      log({ kind: 'sliced' }),
    ]
  }
  if (piece.holdAt === null && nowMs >= restedMs + habits.restS * 1000 && nowMs < sliceMs - 15 * MINUTE_MS) {
    return [log({ kind: 'hold', ...(holding === undefined ? {} : { cookerId: holding.id }) })]
  }
  // In the cabinet, but its probe still hangs at the fire: it gets one of the cabinet's.
  if (
    piece.holdAt !== null &&
    piece.cookerId === holding?.id &&
    !isHoldingChannel(tonight, piece.channelId)
  ) {
    const channelId = freeProbe(tonight, holding)
    if (channelId !== undefined)
      return [{ kind: 'place-probe', pieceId: piece.id, channelId, at: piece.holdAt }]
  }
  return []
}

/** When the doors open for it, ms since 1970 UTC; undefined when it is for no service that is still known. */
function serviceMs({ tonight, piece }: Pick<PieceView, 'tonight' | 'piece'>): number | undefined {
  const service = tonight.services.find(({ id }) => id === piece.serviceId)
  return service === undefined ? undefined : Date.parse(service.servesAt)
}

function isTimeToPullByFeel(view: PieceView, live: LivePiece): boolean {
  const servesMs = serviceMs(view)
  if (servesMs === undefined) return false
  const nearlyThere = live.model.curve.at(view.nowMs).coreC >= 89
  return (nearlyThere && view.nowMs >= servesMs - 40 * MINUTE_MS) || view.nowMs >= servesMs + 150 * MINUTE_MS
}

function spritz(
  { houseSeed, piece, nowMs }: PieceView,
  after: readonly number[],
  ripeMs?: number,
): CrewAction[] {
  const onMs = Date.parse(piece.onAt ?? '')
  return after.flatMap((seconds, turn): CrewAction[] => {
    const atMs = onMs + seconds * 1000
    if (nowMs < atMs || nowMs > atMs + 2 * MINUTE_MS || ripeMs !== undefined) return []
    const event: NewEvent = {
      id: stableUuid(houseSeed, 'crew', piece.id, 'spritz', turn),
      happenedAt: new Date(atMs).toISOString(),
      fact: { kind: 'spritz' },
    }
    return [{ kind: 'log-on-piece', pieceId: piece.id, event }]
  })
}

function reseat({ houseSeed, piece, nowMs }: PieceView, seed: string, afterS: number): CrewAction[] {
  const slip = drawSlip(seed, Date.parse(piece.onAt ?? ''))
  if (slip === undefined) return []
  const atMs = slip.fromMs + afterS * 1000
  if (nowMs < atMs || nowMs > Math.min(slip.toMs, atMs + 2 * MINUTE_MS)) return []
  const event: NewEvent = {
    id: stableUuid(houseSeed, 'crew', piece.id, 'probe_reseated'),
    happenedAt: new Date(atMs).toISOString(),
    fact: { kind: 'probe_reseated' },
  }
  return [{ kind: 'log-on-piece', pieceId: piece.id, event }]
}

/** Fires that had run low and were fed in the last minutes, where something stands on them. */
function tendFires(houseSeed: string, tonight: Tonight, nowMs: number): CrewAction[] {
  const site = tonight.site.slug
  const inUse = tonight.cookers.filter(({ id }) => {
    return tonight.pieces.some(
      (piece) => piece.cookerId === id && piece.onAt !== null && piece.pulledAt === null,
    )
  })
  return inUse.flatMap((cooker) =>
    fuelFedAt(pitSeed(houseSeed, site, cooker.name), pitKinds[cooker.kind], nowMs - 2 * MINUTE_MS, nowMs).map(
      (atMs): CrewAction => ({
        kind: 'log-on-cooker',
        cookerId: cooker.id,
        event: {
          id: stableUuid(houseSeed, 'crew', site, cooker.name, 'fire_tended', atMs),
          happenedAt: new Date(atMs).toISOString(),
          fact: { kind: 'fire_tended' },
        },
      }),
    ),
  )
}

const MINUTE_MS = 60_000
const HOUR_MS = 3_600_000
/** Nothing cooks for longer than this. */
const TOO_LONG_MS = 30 * HOUR_MS
