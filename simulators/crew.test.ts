import { beforeAll, describe, expect, it } from 'vitest'

import { NewEvent } from '#shared/contract/event.ts'
import { NewPiece } from '#shared/contract/piece.ts'
import { sequenceFault } from '#shared/domain/event-sequence.ts'

import { decideCrew, type CrewAction } from './crew.ts'
import { tonight, type DemoTonight } from './demo/tonight.ts'
import { createLiveHouse, type LiveHouse } from './live/live-house.ts'
import { CREW_SERVICE_NOTE, nightPieces } from './night-plan.ts'
import { openLedger, type Ledger } from './testing/ledger.ts'

const start = Date.UTC(2026, 11, 1, 5, 30)
const HOUR_MS = 3_600_000
const houseSeed = '1'

let night: DemoTonight
beforeAll(() => {
  night = tonight({ seed: houseSeed, now: start })
}, 60_000)

const build = (ledger: Ledger, nowMs: number): LiveHouse =>
  createLiveHouse({ houseSeed, states: [ledger.state(nowMs)], firstSetC: new Map(), setChanges: [], nowMs })

/** Lets the crew work every five minutes; the house is built anew only when something happened. */
function work(ledger: Ledger, fromMs: number, hours: number): CrewAction[] {
  const done: CrewAction[] = []
  let house = build(ledger, fromMs)
  for (let nowMs = fromMs; nowMs <= fromMs + hours * HOUR_MS; nowMs += 5 * 60_000) {
    const actions = decideCrew({ houseSeed, state: ledger.state(nowMs), house, nowMs })
    for (const action of actions) ledger.enter(action, nowMs)
    done.push(...actions)
    if (actions.length > 0) house = build(ledger, nowMs)
  }
  return done
}

describe('decideCrew', () => {
  it('brings a night to its end and starts the next, so that the house stays alive', () => {
    const ledger = openLedger(night, 'mill-yard')
    const first = ledger.state(start).tonight.pieces.map(({ id }) => id)
    const actions = work(ledger, start, 15)
    const logged = (kind: string) =>
      ledger.events.filter(({ pieceId, fact }) => fact.kind === kind && first.includes(pieceId ?? 0))
    expect(logged('sliced')).toHaveLength(first.length)
    for (const pieceId of first) {
      const events = ledger.events.filter((event) => event.pieceId === pieceId)
      const fault = sequenceFault(
        events.map((event) => ({
          ...event,
          happenedAt: Date.parse(event.happenedAt),
          recordedAt: Date.parse(event.recordedAt),
        })),
      )
      expect(fault).toBeUndefined()
      expect(events.filter(({ fact }) => fact.kind === 'weighed')).toHaveLength(3)
    }
    expect(actions.filter(({ kind }) => kind === 'add-service')).toHaveLength(1)
    const standing = ledger.state(start + 15 * HOUR_MS).tonight.pieces
    expect(standing.length).toBeGreaterThan(1)
    expect(standing.every(({ onAt }) => Date.parse(onAt ?? '') > start + 7 * HOUR_MS)).toBe(true)
    expect(standing.every(({ channelId }) => channelId !== null)).toBe(true)
  }, 60_000)

  it('sends only what the contract takes', () => {
    const ledger = openLedger(night, 'quarry-road')
    const actions = work(ledger, start, 3)
    expect(actions.length).toBeGreaterThan(0)
    for (const action of actions) {
      if (action.kind === 'log-on-piece' || action.kind === 'log-on-cooker') NewEvent.parse(action.event)
      if (action.kind === 'start-piece') NewPiece.parse(action.start)
    }
  }, 60_000)

  it('wraps 10 to 25 minutes after the wrap temperature, unless somebody did', () => {
    const ledger = openLedger(night, 'quarry-road')
    const [piece] = ledger.state(start).tonight.pieces.filter(({ label }) => label === 'S1')
    if (piece === undefined) throw new Error('no S1')
    const live = build(ledger, start).piece(piece.id)
    const ripeMs = live?.whenReached(piece.wrapAtC, start + 6 * HOUR_MS) ?? NaN
    work(ledger, start, (ripeMs - start) / HOUR_MS + 0.6)
    const wraps = ledger.events.filter(({ pieceId, fact }) => pieceId === piece.id && fact.kind === 'wrap')
    expect(wraps).toHaveLength(1)
    const delayMinutes = (Date.parse(wraps[0]?.happenedAt ?? '') - ripeMs) / 60_000
    expect(delayMinutes).toBeGreaterThanOrEqual(10)
    expect(delayMinutes).toBeLessThanOrEqual(30)
  }, 60_000)

  it('puts a held piece on a probe of the cabinet', () => {
    const ledger = openLedger(night, 'mill-yard')
    const actions = work(ledger, start, 2)
    const resting = ledger.state(start + 2 * HOUR_MS).tonight.pieces.find(({ label }) => label === '3a')
    expect(resting?.stage).toBe('holding')
    expect(actions.some((action) => action.kind === 'place-probe' && action.pieceId === resting?.id)).toBe(
      true,
    )
    const box = ledger
      .state(start + 2 * HOUR_MS)
      .tonight.devices.find(({ slug }) => slug === 'holding-room-box')
    expect(box?.channels.map(({ id }) => id)).toContain(resting?.channelId)
  }, 60_000)

  it('clears away what was left on for days, and then plans a night', () => {
    const ledger = openLedger(night, 'mill-yard')
    const later = start + 72 * HOUR_MS
    work(ledger, later, 1)
    const { pieces, services } = ledger.state(later + HOUR_MS).tonight
    expect(pieces.every(({ onAt }) => Date.parse(onAt ?? '') > later - 2 * HOUR_MS)).toBe(true)
    expect(services.some(({ note }) => note === CREW_SERVICE_NOTE)).toBe(true)
  }, 60_000)
})

describe('nightPieces', () => {
  it('is the same whenever it is asked for, and none goes on too late', () => {
    const servesMs = start + 15 * HOUR_MS
    const pieces = nightPieces(houseSeed, 'quarry-road', servesMs)
    expect(nightPieces(houseSeed, 'quarry-road', servesMs)).toEqual(pieces)
    expect(pieces.map(({ label }) => label)).toEqual(['N1', 'N2', 'S1', 'R1', 'R2', '1a', '1b'])
    for (const { onMs, recipe } of pieces) {
      expect((servesMs - onMs) / HOUR_MS).toBeGreaterThan(Math.min(14.5, recipe.plannedHours))
    }
  })
})
