import { describe, expect, it } from 'vitest'
import type { Cooker } from '@/shared/contract/cooker.ts'
import type { Device } from '@/shared/contract/device.ts'
import type { LatestForecast } from '@/shared/contract/forecast.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { ChannelTrace, TonightState } from '@/stores/live-types.ts'
import { nightOf } from './night.ts'
import { serviceRisk } from './service-risk.ts'

const hour = 3_600_000
const minute = 60_000
const now = Date.parse('2026-12-02T07:00:00Z')
const instant = (ms: number) => new Date(ms).toISOString()

function cooker(id: number, change: Partial<Cooker> = {}): Cooker {
  return {
    id,
    version: 1,
    site: 'quarry-road',
    name: `Cooker ${id}`,
    kind: 'offset',
    capacity: 6,
    position: id,
    pitSetC: 121,
    bandLowC: 110,
    bandHighC: 130,
    pitChannelId: id * 10,
    ...change,
  }
}

function piece(id: number, change: Partial<Piece> = {}): Piece {
  return {
    ...{
      id,
      version: 1,
      site: 'quarry-road',
      label: `N${id}`,
      parentId: null,
      followsId: null,
      serviceId: null,
    },
    recipe: { id: 1, slug: 'house-brisket', name: 'House Brisket' },
    ...{ cured: false, rawKg: 6, trimmedKg: null, cookedKg: null, slicedKg: null },
    ...{
      wrapAtC: 74,
      wrapMethod: 'paper',
      pullAtC: 95,
      stage: 'cooking',
      cookerId: 1,
      cookedOnId: 1,
      position: null,
    },
    channelId: 100 + id,
    onAt: instant(now - 6 * hour),
    ...{ wrappedAt: null, wrappedWith: null, pulledAt: null, restAt: null, holdAt: null, doneAt: null },
    ...change,
  }
}

function forecast(pieceId: number, hoursToPull: number): LatestForecast {
  const reach = (hours: number) => ({
    p10: instant(now + (hours - 1) * hour),
    p25: instant(now + (hours - 0.5) * hour),
    p50: instant(now + hours * hour),
    p75: instant(now + (hours + 0.5) * hour),
    p90: instant(now + (hours + 1) * hour),
  })
  return {
    ...{
      pieceId,
      madeAt: instant(now),
      phase: 'stall',
      wrapReason: null,
      wrapReachedAt: null,
      pullReason: null,
    },
    wrap: reach(2),
    pull: reach(hoursToPull),
    fan: [],
    pullMovedMin: null,
  }
}

function state(change: {
  cookers?: Cooker[]
  pieces?: Piece[]
  forecasts?: LatestForecast[]
  devices?: Device[]
  pitC?: number
}): TonightState {
  const cookers = change.cookers ?? [cooker(1), cooker(2)]
  const pieces = change.pieces ?? [piece(1)]
  return {
    site: { id: 1, slug: 'quarry-road', name: 'Quarry Road', timeZone: 'America/Chicago', elevationM: 180 },
    cookers: new Map(cookers.map((each) => [each.id, each])),
    pieces: new Map(pieces.map((each) => [each.id, each])),
    devices: new Map((change.devices ?? []).map((each) => [each.id, each])),
    services: new Map([
      [
        1,
        {
          id: 1,
          site: 'quarry-road',
          date: '2026-12-02',
          servesAt: instant(now + 8 * hour),
          portions: 80,
          note: null,
        },
      ],
    ]),
    forecasts: new Map((change.forecasts ?? [forecast(1, 5)]).map((each) => [each.pieceId, each])),
    latest: new Map([
      ...cookers.map((each) => [each.id * 10, { at: now, c: change.pitC ?? 121 }] as const),
      ...pieces.map((each) => [100 + each.id, { at: now, c: 68 }] as const),
    ]),
    events: new Map(),
  }
}

function night(tonight: TonightState, stale: number[] = [], traces = new Map<number, ChannelTrace>()) {
  return nightOf({
    tonight,
    traces,
    now,
    freshnessOf: (channelId) =>
      stale.includes(channelId)
        ? { stale: true, why: 'channel', ageMs: 20 * minute }
        : { stale: false, why: 'fresh', ageMs: 1000 },
  })
}

function device(channelIds: number[]): Device {
  return {
    ...{
      id: 7,
      site: 'quarry-road',
      slug: 'yard-box',
      name: 'Yard Box',
      intervalS: 5,
      connection: 'online' as const,
    },
    ...{ lastSeenAt: null, batteryPercent: null, signalDbm: null },
    channels: channelIds.map((id, i) => ({ id, number: i + 1, unit: 'Cel' as const, placedIn: null })),
  }
}

describe('nightOf', () => {
  it('gives each cooker a lane in the wall’s order, with the pieces that stand on it', () => {
    const { lanes } = night(
      state({
        cookers: [cooker(1, { position: 2 }), cooker(2, { position: 1 })],
        pieces: [piece(1), piece(2)],
      }),
    )
    expect(lanes.map((lane) => [lane.cooker.id, lane.data.pieces.map(({ label }) => label)])).toEqual([
      [2, []],
      [1, ['N1', 'N2']],
    ])
  })

  it('does not draw what is done or has not gone on', () => {
    const { lanes } = night(state({ pieces: [piece(1, { stage: 'done' }), piece(2, { stage: 'waiting' })] }))
    expect(lanes.flatMap((lane) => lane.data.pieces)).toEqual([])
  })

  it('calls a lane abnormal when its pit is out of its band, but not an empty one', () => {
    const abnormal = night(state({ pitC: 100 })).lanes.map((lane) => [
      lane.cooker.id,
      lane.abnormal,
      lane.pit.kind,
    ])
    expect(abnormal).toEqual([
      [1, true, 'below'],
      [2, false, 'idle'],
    ])
    expect(night(state({})).lanes.some((lane) => lane.abnormal)).toBe(false)
  })

  it('asks to look after a silent probe, and says so on its lane', () => {
    const { actions, lanes } = night(state({}), [101])
    expect(actions[0]).toMatchObject({ kind: 'check-probe', subject: 'N1', dueNow: true })
    expect(lanes[0]).toMatchObject({ abnormal: true })
    expect(lanes[0]?.data.pieces[0]?.silentSince).toBe(now)
  })

  it('does not call a probe silent that was just put in', () => {
    const fresh = piece(1, { onAt: instant(now - minute) })
    const old = state({ pieces: [fresh] })
    const tonight = {
      ...old,
      latest: new Map([...old.latest, [101, { at: now - 40 * hour, c: 20 }] as const]),
    }
    const { actions, lanes } = night(tonight, [101])
    expect(actions.some(({ kind }) => kind === 'check-probe')).toBe(false)
    expect(lanes[0]?.data.pieces[0]).toMatchObject({ silentSince: null, latest: null })
    const later = nightOf({
      tonight,
      traces: new Map(),
      now: now + 5 * minute,
      freshnessOf: () => ({ stale: true, why: 'channel', ageMs: 1 }),
    })
    expect(later.lanes[0]?.data.pieces[0]?.silentSince).toBe(now - minute)
  })

  it('names a device once when all that hangs on it is silent', () => {
    const devices = [device([10, 101])]
    const whole = night(state({ devices }), [10, 101]).actions.filter(({ kind }) => kind === 'check-probe')
    expect(whole.map(({ subject }) => subject)).toEqual(['Yard Box'])
    const single = night(state({ devices }), [101]).actions.filter(({ kind }) => kind === 'check-probe')
    expect(single.map(({ subject }) => subject)).toEqual(['N1'])
  })

  it('begins a piece’s line where the piece went on, not with the probe’s earlier place', () => {
    const at = [now - 8 * hour, now - 5 * hour, now]
    const trace = { channelId: 101, at, c: [60, 40, 68], low: [], high: [] }
    const { lanes } = night(state({}), [], new Map([[101, trace]]))
    expect(lanes[0]?.data.pieces[0]?.line).toEqual([
      [now - 5 * hour, 40],
      [now, 68],
    ])
  })

  it('asks for the pull since the readings reached it', () => {
    const minutes = Array.from({ length: 60 }, (_, i) => now - (59 - i) * minute)
    const c = minutes.map((each) => (each < now - 30 * minute ? 90 : 96))
    const trace = { channelId: 101, at: minutes, c, low: [], high: [] }
    const done: LatestForecast = { ...forecast(1, 5), phase: 'done', wrap: null, pull: null }
    const { actions } = night(
      state({ pieces: [piece(1, { stage: 'wrapped' })], forecasts: [done] }),
      [],
      new Map([[101, trace]]),
    )
    const [pull] = actions
    expect(pull).toMatchObject({ kind: 'pull', dueNow: true, urgency: 'now' })
    expect(now - (pull?.at ?? 0)).toBeGreaterThan(20 * minute)
  })

  it('lets a piece without a probe go by its sibling', () => {
    const flat = piece(2, { channelId: null, followsId: 1 })
    const { lanes } = night(state({ pieces: [piece(1), flat] }))
    expect(lanes[0]?.data.pieces[1]).toMatchObject({ follows: 'N1', probed: false, pull: null })
  })
})

describe('serviceRisk', () => {
  const servesAt = now + 8 * hour
  it('wants the piece pulled and rested by the service', () => {
    expect(serviceRisk({ p50: now + 5 * hour, p90: now + 6.9 * hour }, servesAt)).toBeNull()
    expect(serviceRisk({ p50: now + 5 * hour, p90: now + 7.1 * hour }, servesAt)).toBe('soon')
    expect(serviceRisk({ p50: now + 7.1 * hour, p90: now + 9 * hour }, servesAt)).toBe('now')
    expect(serviceRisk(null, servesAt)).toBeNull()
  })
})
