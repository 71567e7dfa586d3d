import { describe, expect, it } from 'vitest'
import { freshness, gapMsOf } from './live-freshness.ts'
import { applyChanges, tonightFrom } from './live-reducer.ts'
import { deviceWith, snapshot, snapshotNow } from './testing/snapshot.ts'

const state = tonightFrom(snapshot())

describe('a channel', () => {
  it('is fresh for three of its device’s own intervals, and stale after', () => {
    expect(freshness(state, 10, snapshotNow + 15_000)).toEqual({ stale: false, why: 'fresh', ageMs: 15_000 })
    expect(freshness(state, 10, snapshotNow + 15_001)).toMatchObject({ stale: true, why: 'device' })
  })

  it('of a slower device is given more time', () => {
    const slow = tonightFrom(snapshot({ devices: [deviceWith(1, [10, 11], 60)] }))
    expect(freshness(slow, 10, snapshotNow + 180_000).stale).toBe(false)
    expect(freshness(slow, 10, snapshotNow + 180_001).stale).toBe(true)
  })

  it('that alone is silent is told from a device that is', () => {
    const now = snapshotNow + 60_000
    const neighbourSpeaks = applyChanges(state, { readings: [[11, now, 63]] })
    expect(freshness(neighbourSpeaks, 10, now)).toMatchObject({ stale: true, why: 'channel' })
    expect(freshness(neighbourSpeaks, 11, now)).toMatchObject({ stale: false })
  })

  it('that was never heard is stale without an age', () => {
    expect(freshness(state, 11, snapshotNow)).toEqual({ stale: true, why: 'never', ageMs: null })
  })

  it('whose device’s clock runs ahead is not younger than now', () => {
    expect(freshness(state, 10, snapshotNow - 3000)).toEqual({ stale: false, why: 'fresh', ageMs: 0 })
  })
})

it('draws a gap no finer than the lines’ own steps, and wider for a slow device', () => {
  const devices = new Map([
    [1, deviceWith(1, [10], 5)],
    [2, deviceWith(2, [20], 60)],
  ])
  expect(gapMsOf(devices, 10)).toBe(90_000)
  expect(gapMsOf(devices, 20)).toBe(180_000)
})
