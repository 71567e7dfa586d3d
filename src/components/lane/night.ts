import type { LaneData, LanePiece, TimeWindow } from '@/components/chart/lane-data.ts'
import { nightWindow } from '@/components/chart/time-window.ts'
import type { Cooker } from '@/shared/contract/cooker.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { Service } from '@/shared/contract/site.ts'
import type { NextAction, PieceStanding } from '@/shared/domain/next-actions.ts'
import { nextActions } from '@/shared/domain/next-actions.ts'
import type { PitState } from '@/shared/domain/pit-state.ts'
import { isAbnormal, pitState } from '@/shared/domain/pit-state.ts'
import { createReachRule } from '@/shared/forecast/reach-rule.ts'
import type { ChannelTrace, Freshness, TonightState } from '@/stores/live-types.ts'
import { eventMarks, pieceMarks } from './lane-marks.ts'
import { lanePiece, lineFrom, moment } from './lane-piece.ts'
import { silentSources } from './silent-sources.ts'

/** A cooker as the wall shows it. */
export interface CookerLane {
  cooker: Cooker
  pit: PitState
  data: LaneData
  /** Something on it needs a hand. */
  abnormal: boolean
}

/** A site's night, ready to be shown. */
export interface Night {
  window: TimeWindow
  /** The coming service, or the one that has just begun. */
  service: Service | null
  lanes: CookerLane[]
  actions: NextAction[]
}

export interface NightInput {
  tonight: TonightState
  traces: ReadonlyMap<number, ChannelTrace>
  now: number
  freshnessOf: (channelId: number) => Freshness
}

/** A service stays in sight this long after its hour. */
const serviceLingersMs = 2 * 3_600_000

/** Builds the whole night from what is live: lanes in the wall's order and what is next. */
export function nightOf(input: NightInput): Night {
  const { tonight, now } = input
  const cookers = [...tonight.cookers.values()].sort((a, b) => a.position - b.position || a.id - b.id)
  const pieces = [...tonight.pieces.values()].filter(isOnTonight).sort((a, b) => a.id - b.id)
  const services = [...tonight.services.values()]
    .filter(({ servesAt }) => Date.parse(servesAt) > now - serviceLingersMs)
    .sort((a, b) => Date.parse(a.servesAt) - Date.parse(b.servesAt))
  const service = services[0] ?? null
  const drawn = new Map(pieces.map((piece) => [piece.id, drawPiece(piece, input, service)]))
  const window = windowOf([...drawn.values()], pieces, service, now)
  const hours = services.map(({ servesAt }) => Date.parse(servesAt)).filter((at) => at <= window.to)
  const inUse = (cookerId: number) => pieces.some((piece) => piece.cookerId === cookerId)

  const pits = new Map(cookers.map((cooker) => [cooker.id, pitOf(cooker, inUse(cooker.id), input)]))
  const silent = silentSources({
    cookers,
    pieces,
    devices: [...tonight.devices.values()],
    now,
    inUse,
    freshnessOf: (channelId) => input.freshnessOf(channelId),
    latest: tonight.latest,
  })
  const actions = nextActions({
    now,
    silent,
    cookers: cookers.map(({ id, name }) => ({ id, name, pit: pits.get(id) ?? { kind: 'no-probe' } })),
    pieces: pieces.map((piece) => standing(piece, drawn.get(piece.id), input)),
  })
  const lanes = cookers.map((cooker): CookerLane => {
    const own = pieces.filter((piece) => piece.cookerId === cooker.id)
    const onIt = own.flatMap((piece) => drawn.get(piece.id) ?? [])
    const pit = pits.get(cooker.id) ?? { kind: 'no-probe' }
    const urgent = actions.some(
      (action) =>
        action.urgency !== null &&
        (action.cookerId === cooker.id || own.some(({ id }) => id === action.pieceId)),
    )
    return {
      cooker,
      pit,
      data: laneData(cooker, pit, own, onIt, window, hours, input),
      abnormal: isAbnormal(pit) || urgent || onIt.some((piece) => piece.risk !== null),
    }
  })
  return { window, service, lanes, actions }
}

function isOnTonight(piece: Piece): boolean {
  return piece.stage !== 'done' && piece.stage !== 'waiting'
}

function drawPiece(piece: Piece, input: NightInput, service: Service | null): LanePiece {
  const { tonight, traces } = input
  const { channelId } = piece
  const own = piece.serviceId === null ? service : (tonight.services.get(piece.serviceId) ?? service)
  return lanePiece(piece, {
    trace: channelId === null ? undefined : traces.get(channelId),
    latest: channelId === null ? undefined : tonight.latest.get(channelId),
    freshness: channelId === null ? undefined : input.freshnessOf(channelId),
    now: input.now,
    forecast: tonight.forecasts.get(piece.id),
    follows: piece.followsId === null ? null : (tonight.pieces.get(piece.followsId)?.label ?? null),
    servesAt: own === null ? null : Date.parse(own.servesAt),
  })
}

function windowOf(
  drawn: readonly LanePiece[],
  pieces: readonly Piece[],
  service: Service | null,
  now: number,
): TimeWindow {
  return nightWindow({
    now,
    starts: pieces.flatMap((piece) => moment(piece.onAt) ?? []),
    ends: [
      ...drawn.flatMap((piece) => piece.pull?.p90 ?? []),
      ...(service === null ? [] : [Date.parse(service.servesAt)]),
    ],
  })
}

function pitOf(cooker: Cooker, inUse: boolean, { tonight, freshnessOf }: NightInput): PitState {
  const channelId = cooker.pitChannelId
  return pitState({
    kind: cooker.kind,
    bandLowC: cooker.bandLowC,
    bandHighC: cooker.bandHighC,
    inUse,
    hasProbe: channelId !== null,
    latest: channelId === null ? null : (tonight.latest.get(channelId) ?? null),
    stale: channelId !== null && freshnessOf(channelId).stale,
  })
}

function laneData(
  cooker: Cooker,
  pit: PitState,
  pieces: readonly Piece[],
  drawn: LanePiece[],
  window: TimeWindow,
  services: number[],
  { tonight, traces }: NightInput,
): LaneData {
  const ids = new Set(pieces.map((piece) => piece.id))
  const events = [...tonight.events.values()].filter((event) => {
    if (event.fact.kind === 'wrap' || event.fact.kind === 'pull') return false
    return event.pieceId === null ? event.cookerId === cooker.id : ids.has(event.pieceId)
  })
  return {
    window,
    services,
    pit:
      cooker.pitChannelId === null
        ? null
        : {
            line: lineFrom(traces.get(cooker.pitChannelId), window.from),
            bands: [{ from: -Infinity, band: cooker }],
            silentSince: pit.kind === 'silent' ? (pit.lastAt ?? window.from) : null,
          },
    pieces: drawn,
    marks: [...pieces.flatMap(pieceMarks), ...eventMarks(events)],
  }
}

function standing(piece: Piece, drawn: LanePiece | undefined, { tonight }: NightInput): PieceStanding {
  const forecast = tonight.forecasts.get(piece.id) ?? followed(piece, tonight)
  return {
    id: piece.id,
    label: piece.label,
    cookerId: piece.cookerId,
    stage: piece.stage,
    wrapMethod: piece.wrapMethod,
    pulledAt: moment(piece.pulledAt),
    restAt: moment(piece.restAt),
    pullReachedAt: forecast?.phase === 'done' && drawn !== undefined ? reachedAt(drawn) : null,
    forecast:
      forecast === undefined
        ? null
        : {
            madeAt: Date.parse(forecast.madeAt),
            phase: forecast.phase,
            wrap: drawn?.wrap ?? null,
            wrapReachedAt: moment(forecast.wrapReachedAt),
            pull: drawn?.pull ?? null,
          },
  }
}

/** A piece without a probe of its own goes by its sibling's forecast. */
function followed(piece: Piece, tonight: TonightState) {
  return piece.channelId === null && piece.followsId !== null
    ? tonight.forecasts.get(piece.followsId)
    : undefined
}

/** When a piece's readings reached its pull temperature, by the product's rule; null when they have not. */
function reachedAt(piece: LanePiece): number | null {
  const rule = createReachRule([piece.pullAtC])
  const start = piece.line[0]?.[0] ?? 0
  for (const [at, c] of piece.line) rule.add((at - start) / 1000, c ?? Number.NaN)
  const seconds = rule.reachedS[0]
  return seconds === undefined ? null : start + seconds * 1000
}
