import { describe, expect, it } from 'vitest'
import { nextActions, overdueMs, usualRestMs } from './next-actions.ts'
import type { PieceOutlook, PieceStanding } from './next-actions.ts'

const now = Date.parse('2026-12-01T06:00:00Z')
const minutes = (count: number) => now + count * 60_000

function outlook(change: Partial<PieceOutlook> = {}): PieceOutlook {
  return {
    madeAt: now,
    phase: 'stall',
    wrap: { p10: minutes(30), p50: minutes(60), p90: minutes(120) },
    wrapReachedAt: null,
    pull: { p10: minutes(240), p50: minutes(300), p90: minutes(400) },
    ...change,
  }
}

function piece(id: number, change: Partial<PieceStanding> = {}): PieceStanding {
  return {
    id,
    label: `N${id}`,
    cookerId: 1,
    stage: 'cooking',
    wrapMethod: 'paper',
    pulledAt: null,
    restAt: null,
    pullReachedAt: null,
    forecast: outlook(),
    ...change,
  }
}

function actionsOf(pieces: PieceStanding[]) {
  return nextActions({
    now,
    pieces,
    cookers: [{ id: 1, name: 'North Offset', pit: { kind: 'in-band', c: 121 } }],
    silent: [],
  })
}

describe('nextActions', () => {
  it('gives the next step of a cooking piece with its interval and its cooker', () => {
    expect(actionsOf([piece(1)])).toEqual([
      {
        key: 'wrap-1',
        kind: 'wrap',
        subject: 'N1',
        place: 'North Offset',
        pieceId: 1,
        cookerId: 1,
        at: minutes(60),
        dueNow: false,
        early: minutes(30),
        late: minutes(120),
        urgency: null,
        pit: null,
      },
    ])
  })

  it('goes on to the pull once wrapped, or when there will be no wrap', () => {
    expect(actionsOf([piece(1, { stage: 'wrapped' })])[0]).toMatchObject({ kind: 'pull', at: minutes(300) })
    expect(actionsOf([piece(1, { wrapMethod: 'none' })])[0]).toMatchObject({ kind: 'pull' })
  })

  it('puts forecasts in the order of their medians', () => {
    const late = piece(1, { stage: 'wrapped' })
    const early = piece(2)
    expect(actionsOf([late, early]).map((action) => action.key)).toEqual(['wrap-2', 'pull-1'])
  })

  it('asks for the wrap once its temperature was reached, more urgently when it waits', () => {
    const reached = (agoMs: number) =>
      actionsOf([piece(1, { forecast: outlook({ wrap: null, wrapReachedAt: now - agoMs }) })])[0]
    expect(reached(60_000)).toMatchObject({ kind: 'wrap', dueNow: true, urgency: 'soon', at: now - 60_000 })
    expect(reached(overdueMs)).toMatchObject({ urgency: 'now' })
  })

  it('asks for the pull since the readings reached it, not since the last forecast', () => {
    const done = outlook({ phase: 'done', wrap: null, pull: null })
    const at = minutes(-20)
    expect(actionsOf([piece(1, { stage: 'wrapped', forecast: done, pullReachedAt: at })])[0]).toMatchObject({
      kind: 'pull',
      at,
      urgency: 'now',
    })
  })

  it('says nothing of a piece whose time is not known, is held or is done', () => {
    const unknown = outlook({ wrap: null, pull: null })
    expect(actionsOf([piece(1, { forecast: unknown })])).toEqual([])
    expect(actionsOf([piece(1, { forecast: null })])).toEqual([])
    expect(actionsOf([piece(1, { stage: 'holding' }), piece(2, { stage: 'done' })])).toEqual([])
  })

  it('keeps a forecast that slipped into the past a forecast, from now on', () => {
    const slipped = outlook({ wrap: { p10: minutes(-30), p50: minutes(-5), p90: minutes(10) } })
    expect(actionsOf([piece(1, { forecast: slipped })])[0]).toMatchObject({
      dueNow: false,
      at: now,
      early: now,
      late: minutes(10),
    })
  })

  it('rests what was pulled and holds what has rested', () => {
    expect(actionsOf([piece(1, { stage: 'pulled', pulledAt: minutes(-5) })])[0]).toMatchObject({
      kind: 'rest',
      dueNow: true,
      at: minutes(-5),
    })
    expect(actionsOf([piece(1, { stage: 'resting', restAt: minutes(-10) })])[0]).toMatchObject({
      kind: 'hold',
      dueNow: false,
      at: minutes(-10) + usualRestMs,
    })
    expect(actionsOf([piece(1, { stage: 'resting', restAt: minutes(-70) })])[0]).toMatchObject({
      kind: 'hold',
      dueNow: true,
    })
  })

  it('puts what is due before what is forecast, and the urgent before the rest', () => {
    const actions = nextActions({
      now,
      pieces: [piece(1, { forecast: outlook({ wrap: { p10: now, p50: now, p90: now } }) })],
      cookers: [
        { id: 1, name: 'North Offset', pit: { kind: 'below', c: 100, byC: 5, urgency: 'soon' } },
        { id: 2, name: 'Cabinet One', pit: { kind: 'above', c: 180, byC: 40, urgency: 'now' } },
        { id: 3, name: 'Kettle', pit: { kind: 'idle', c: 20 } },
      ],
      silent: [{ key: 'channel-9', name: 'Box A, 3', lastAt: minutes(-4), pieceId: 1, cookerId: null }],
    })
    expect(actions.map((action) => action.key)).toEqual(['pit-2', 'silent-channel-9', 'pit-1', 'wrap-1'])
  })
})
