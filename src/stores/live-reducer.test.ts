import { describe, expect, it } from 'vitest'
import type { Cooker } from '@/shared/contract/cooker.ts'
import { applyChanges, sequence, tonightFrom } from './live-reducer.ts'
import { snapshot, snapshotNow, spritz } from './testing/snapshot.ts'

const first = 'f0000000-0000-4000-8000-000000000001'
const second = 'f0000000-0000-4000-8000-000000000002'

describe('a snapshot', () => {
  it('is found by id', () => {
    const state = tonightFrom(snapshot())
    expect(state.cookers.get(1)?.name).toBe('North Offset')
    expect(state.latest.get(10)).toEqual({ at: snapshotNow, c: 120 })
  })

  it('keeps the events that were heard before it', () => {
    const before = applyChanges(tonightFrom(snapshot()), { events: [spritz(first)] })
    expect([...tonightFrom(snapshot(), before).events.keys()]).toEqual([first])
  })
})

describe('changes', () => {
  it('replace whole objects, leave the old state alone and keep what did not change', () => {
    const before = tonightFrom(snapshot())
    const [cooker] = snapshot().cookers
    if (cooker === undefined) throw new Error('the snapshot has no cooker')
    const hotter: Cooker = { ...cooker, pitSetC: 135, version: 2 }
    const after = applyChanges(before, { cookers: [hotter] })
    expect(after.cookers.get(1)?.pitSetC).toBe(135)
    expect(before.cookers.get(1)?.pitSetC).toBe(121)
    expect(after.pieces).toBe(before.pieces)
    expect(after.latest).toBe(before.latest)
  })

  it('take a newer reading as the latest, never an older one that came late', () => {
    const state = applyChanges(tonightFrom(snapshot()), {
      readings: [
        [10, snapshotNow + 5000, 121],
        [10, snapshotNow - 60_000, 90],
        [11, snapshotNow, 63],
      ],
    })
    expect(state.latest.get(10)).toEqual({ at: snapshotNow + 5000, c: 121 })
    expect(state.latest.get(11)).toEqual({ at: snapshotNow, c: 63 })
  })

  it('mark an event that a later one corrects', () => {
    const logged = applyChanges(tonightFrom(snapshot()), { events: [spritz(first)] })
    const undone = applyChanges(logged, { events: [spritz(second, first)] })
    expect(undone.events.get(first)?.correctedById).toBe(second)
    expect(logged.events.get(first)?.correctedById).toBeNull()
  })

  it('remember a thousand events and forget the oldest', () => {
    let state = tonightFrom(snapshot())
    for (let i = 0; i < 1005; i++) {
      state = applyChanges(state, { events: [spritz(`event ${i}`)] })
    }
    expect(state.events.size).toBe(1000)
    expect(state.events.has('event 4')).toBe(false)
    expect(state.events.has('event 5')).toBe(true)
  })
})

describe('the sequence of frames', () => {
  const delta = (epoch: string, seq: number) =>
    ({ type: 'delta', site: 'quarry-road', epoch, seq, sentAt: 0, changes: {} }) as const
  const place = { epoch: 'a', seq: 7 }

  it('applies the next, ignores the old, and misses what is not next', () => {
    expect(sequence(place, delta('a', 8))).toBe('apply')
    expect(sequence(place, delta('a', 7))).toBe('ignore')
    expect(sequence(place, delta('a', 3))).toBe('ignore')
    expect(sequence(place, delta('a', 9))).toBe('missed')
  })

  it('misses everything of another server process, also a lower number', () => {
    expect(sequence(place, delta('b', 8))).toBe('missed')
    expect(sequence(place, delta('b', 1))).toBe('missed')
    expect(sequence(null, delta('a', 1))).toBe('missed')
  })
})
