import { useQuery, useQueryClient } from '@tanstack/vue-query'
import { computed, watch, type ComputedRef } from 'vue'
import { call } from '@/api/client.ts'
import type { BandSpan, LaneData, LanePiece } from '@/components/chart/lane-data.ts'
import { eventMarks } from '@/components/lane/lane-marks.ts'
import { lanePiece, moment } from '@/components/lane/lane-piece.ts'
import type { Cooker } from '@/shared/contract/cooker.ts'
import type { CookEvent } from '@/shared/contract/event.ts'
import { forecastEndpoints, type LatestForecast } from '@/shared/contract/forecast.ts'
import { pieceEndpoints, type Piece } from '@/shared/contract/piece.ts'
import { readingEndpoints } from '@/shared/contract/reading.ts'
import type { Service } from '@/shared/contract/site.ts'
import type { Phase } from '@/shared/domain/cooking.ts'
import type { LiveSite } from '@/stores/live-types.ts'
import { bandSpans, carriedOn, cookWindow } from './cook-lane.ts'

export interface Cook {
  readonly failed: ComputedRef<unknown>
  readonly piece: ComputedRef<Piece | undefined>
  readonly cooker: ComputedRef<Cooker | undefined>
  readonly service: ComputedRef<Service | undefined>
  readonly forecast: ComputedRef<LatestForecast | undefined>
  /** Oldest first, corrections included. */
  readonly events: ComputedRef<CookEvent[]>
  readonly lane: ComputedRef<{ data: LaneData; piece: LanePiece } | undefined>
  /** In what part of the cook the piece was said to be, oldest first. */
  readonly said: ComputedRef<{ at: number; phase: Phase }[]>
  again(): void
}

/** One piece with everything the page shows of it: fetched once, then carried on by what is live. */
export function useCook(pieceId: ComputedRef<number>, live: LiveSite): Cook {
  const queries = useQueryClient()
  const params = computed(() => ({ pieceId: pieceId.value }))
  const detail = useQuery({
    queryKey: ['piece', pieceId],
    queryFn: () => call(pieceEndpoints.get, { params: params.value }),
  })
  const trace = useQuery({
    queryKey: ['trace', pieceId],
    queryFn: () => call(readingEndpoints.ofPiece, { params: params.value, query: { points: 1000 } }),
  })
  const past = useQuery({
    queryKey: ['forecasts', pieceId],
    queryFn: () => call(forecastEndpoints.ofPiece, { params: params.value, query: { limit: 500 } }),
  })

  const piece = computed(() => {
    const fetched = detail.data.value?.piece
    const told = live.tonight.value?.pieces.get(pieceId.value)
    return told !== undefined && told.version >= (fetched?.version ?? 0) ? told : fetched
  })
  const cooker = computed(() => live.tonight.value?.cookers.get(piece.value?.cookerId ?? -1))
  const forecast = computed(
    () => live.tonight.value?.forecasts.get(pieceId.value) ?? detail.data.value?.forecast ?? undefined,
  )
  const service = computed(() => serviceOf(piece.value, live))
  const events = computed(() => {
    const told = [...(live.tonight.value?.events.values() ?? [])].filter(
      (event) => event.pieceId === pieceId.value || isFireOf(event, piece.value),
    )
    const byId = new Map([...(detail.data.value?.events ?? []), ...told].map((event) => [event.id, event]))
    return [...byId.values()].sort((a, b) => Date.parse(a.happenedAt) - Date.parse(b.happenedAt))
  })
  // Another cooker or another probe: the lines have to be put together anew.
  watch(
    () => [piece.value?.cookerId, piece.value?.channelId],
    (_, before) => {
      if (before[0] !== undefined) void queries.invalidateQueries({ queryKey: ['trace', pieceId.value] })
    },
  )

  const lane = computed(() => {
    const current = piece.value
    const onAt = moment(current?.onAt ?? null)
    if (current === undefined || onAt === null) return undefined
    const servesAt = moment(service.value?.servesAt ?? null)
    const own = drawn(current, { live, forecast: forecast.value, servesAt })
    const core = carriedOn(trace.data.value?.core, liveLine(current.channelId, current, live))
    const drawnPiece: LanePiece = { ...own, line: core }
    const doneAt = moment(current.doneAt)
    const window = cookWindow({
      onAt,
      doneAt,
      now: live.now.value,
      late: drawnPiece.pull?.p90 ?? null,
      servesAt: doneAt === null ? servesAt : null,
    })
    const data: LaneData = {
      window,
      ended: doneAt !== null,
      services: servesAt !== null && servesAt < window.to && servesAt > window.from ? [servesAt] : [],
      pit: pitOf(
        cooker.value,
        live,
        carriedOn(trace.data.value?.pit, liveLine(cooker.value?.pitChannelId, current, live)),
        bandSpans(events.value, live.tonight.value?.cookers),
      ),
      pieces: [drawnPiece],
      marks: eventMarks(events.value),
    }
    return { data, piece: drawnPiece }
  })

  const said = computed(() =>
    (past.data.value?.items ?? [])
      .map(({ madeAt, phase }) => ({ at: Date.parse(madeAt), phase }))
      .concat(forecast.value ? [{ at: Date.parse(forecast.value.madeAt), phase: forecast.value.phase }] : [])
      .sort((a, b) => a.at - b.at),
  )

  return {
    failed: computed(() => detail.error.value),
    ...{ piece, cooker, service, forecast, events, lane, said },
    again: () => void detail.refetch(),
  }
}

function drawn(
  piece: Piece,
  sources: { live: LiveSite; forecast: LatestForecast | undefined; servesAt: number | null },
): LanePiece {
  const { live } = sources
  const tonight = live.tonight.value
  const { channelId } = piece
  return lanePiece(piece, {
    trace: undefined,
    latest: channelId === null ? undefined : tonight?.latest.get(channelId),
    freshness: channelId === null || tonight === null ? undefined : live.freshnessOf(channelId),
    forecast: sources.forecast,
    follows: piece.followsId === null ? null : (tonight?.pieces.get(piece.followsId)?.label ?? null),
    servesAt: sources.servesAt,
    now: live.now.value,
  })
}

/** A channel's live line while the piece is on; after its end the channel is someone else's. */
function liveLine(channelId: number | null | undefined, piece: Piece, live: LiveSite) {
  if (channelId === null || channelId === undefined || piece.doneAt !== null) return undefined
  return live.traces.value.get(channelId)
}

function pitOf(
  cooker: Cooker | undefined,
  live: LiveSite,
  line: LanePiece['line'],
  bands: readonly BandSpan[],
): LaneData['pit'] {
  if (line.length === 0) return null
  const pitChannelId = cooker?.pitChannelId ?? null
  const silent = pitChannelId !== null && live.staleOf(pitChannelId)
  const lastAt = pitChannelId === null ? undefined : live.tonight.value?.latest.get(pitChannelId)?.at
  return { line, bands, silentSince: silent ? (lastAt ?? null) : null }
}

function serviceOf(piece: Piece | undefined, live: LiveSite): Service | undefined {
  const services = [...(live.tonight.value?.services.values() ?? [])]
  if (piece?.serviceId != null) return services.find(({ id }) => id === piece.serviceId)
  return services
    .filter(({ servesAt }) => Date.parse(servesAt) > live.now.value)
    .sort((a, b) => Date.parse(a.servesAt) - Date.parse(b.servesAt))[0]
}

function isFireOf(event: CookEvent, piece: Piece | undefined): boolean {
  return event.fact.kind === 'fire_tended' && event.cookerId !== null && event.cookerId === piece?.cookerId
}
