import { describe, expect, it } from 'vitest'

import { createProbe, drawSlip } from './probe.ts'

const start = Date.UTC(2026, 10, 20, 22)
const day = Array.from({ length: 8640 }, (_, turn) => start + turn * 10_000)

describe('createProbe', () => {
  it('shows the same reading for the same moment, whenever it is asked', () => {
    const one = createProbe({ seed: 'a', role: 'meat' })
    const other = createProbe({ seed: 'a', role: 'meat' })
    const values = day.map((atMs) => one.reading(atMs, 70, 120))
    expect(day.toReversed().map((atMs) => other.reading(atMs, 70, 120))).toEqual(values.toReversed())
  })

  it('reads true to within its offset and noise, in sixteenths of a degree', () => {
    const probe = createProbe({ seed: 'b', role: 'meat' })
    const values = day.flatMap((atMs) => probe.reading(atMs, 70, 120) ?? [])
    for (const value of values) expect(value * 16).toBe(Math.round(value * 16))
    const sorted = [...values].sort((a, b) => a - b)
    expect(Math.abs((sorted[Math.floor(sorted.length / 2)] ?? 0) - 70)).toBeLessThan(0.7)
    expect(new Set(values).size).toBeGreaterThan(3)
  })

  it('spikes rarely', () => {
    const probe = createProbe({ seed: 'c', role: 'meat' })
    const values = Array.from({ length: 80_000 }, (_, turn) => probe.reading(start + turn * 5000, 70, 120))
    const spikes = values.filter((value) => value !== undefined && Math.abs(value - 70) > 5)
    expect(spikes.length).toBeGreaterThan(3)
    expect(spikes.length).toBeLessThan(60)
  })

  it('falls silent now and then, for minutes', () => {
    const silent = Array.from({ length: 60 * 24 * 60 }, (_, minute) => start + minute * 60_000).filter(
      (atMs) => {
        return createdOnce.reading(atMs, 70, 120) === undefined
      },
    )
    expect(silent.length).toBeGreaterThan(20)
    expect(silent.length).toBeLessThan(60 * 24 * 60 * 0.02)
  })

  it('reads towards the pit while it has slipped', () => {
    const slip = { fromMs: start + 60_000, toMs: start + 120_000, share: 0.3 }
    const slipped = createProbe({ seed: 'e', role: 'meat', slip })
    const seated = createProbe({ seed: 'e', role: 'meat' })
    const apart = (atMs: number) =>
      (slipped.reading(atMs, 70, 120) ?? 0) - (seated.reading(atMs, 70, 120) ?? 0)
    expect(apart(start)).toBe(0)
    expect(Math.abs(apart(start + 70_000) - 15)).toBeLessThan(0.1)
    expect(apart(start + 120_000)).toBe(0)
  })

  const createdOnce = createProbe({ seed: 'd', role: 'meat' })
})

describe('drawSlip', () => {
  it('slips about one probe in fourteen, well into the cook', () => {
    const slips = Array.from({ length: 1000 }, (_, piece) => drawSlip(`piece ${String(piece)}`, start))
    const happened = slips.flatMap((slip) => slip ?? [])
    expect(happened.length).toBeGreaterThan(40)
    expect(happened.length).toBeLessThan(110)
    for (const slip of happened) {
      expect(slip.fromMs).toBeGreaterThan(start + 3_600_000)
      expect(slip.toMs).toBeGreaterThan(slip.fromMs)
    }
  })
})
