import { describe, expect, it } from 'vitest'

import { SenmlPack } from '#shared/contract/senml.ts'

import { createOutbox, senmlPack, type DeviceReport } from './outbox.ts'

const start = Date.UTC(2026, 11, 1, 5)
const report = (seconds: number): DeviceReport => ({
  atMs: start + seconds * 1000,
  values: [
    { channel: 1, valueC: 121.5 },
    { channel: 2, valueC: 70.25 },
  ],
})

describe('createOutbox', () => {
  it('gives the freshest first and one pack at a time', () => {
    const outbox = createOutbox()
    outbox.add(report(0))
    expect(outbox.next()).toEqual([report(0)])
    outbox.add(report(5))
    expect(outbox.next()).toBeUndefined()
    outbox.arrived()
    expect(outbox.next()).toEqual([report(5)])
    outbox.arrived()
    expect(outbox.next()).toBeUndefined()
    expect(outbox.waiting).toBe(0)
  })

  it('keeps one a minute of an outage, sends the freshest first and the old ones together after it', () => {
    const outbox = createOutbox()
    for (let seconds = 0; seconds < 600; seconds += 5) outbox.add(report(seconds))
    expect(outbox.next()?.[0]).toEqual(report(595))
    outbox.arrived()
    const old = outbox.next() ?? []
    expect(old.map(({ atMs }) => Math.floor((atMs - start) / 60_000))).toEqual([0, 1, 2, 3, 4, 5, 6, 7, 8, 9])
    outbox.arrived()
    expect(outbox.next()).toBeUndefined()
  })

  it('gives again what did not arrive', () => {
    const outbox = createOutbox()
    outbox.add(report(0))
    outbox.next()
    outbox.failed()
    expect(outbox.next()).toEqual([report(0)])
  })

  it('remembers a day and a half, not more', () => {
    const outbox = createOutbox()
    for (let minute = 0; minute < 3000; minute++) outbox.add(report(60 * minute))
    expect(outbox.waiting).toBe(2161)
  })

  it('has nothing to say of a moment without values', () => {
    const outbox = createOutbox()
    outbox.add({ atMs: start, values: [] })
    expect(outbox.next()).toBeUndefined()
  })
})

describe('senmlPack', () => {
  it('says base time and unit once, channels by number, old moments by their offset', () => {
    const pack = senmlPack([report(-60), report(0)], [{ n: 'battery', u: '%EL', v: 80 }])
    expect(SenmlPack.parse(pack)).toEqual([
      { bn: '', bt: start / 1000, bu: 'Cel', n: '1', v: 121.5, t: -60 },
      { n: '2', v: 70.25, t: -60 },
      { n: '1', v: 121.5 },
      { n: '2', v: 70.25 },
      { n: 'battery', u: '%EL', v: 80 },
    ])
  })

  it('keeps the largest pack of a big device far below the broker’s limit', () => {
    const values = Array.from({ length: 16 }, (_, channel) => ({ channel, valueC: 121.0625 }))
    const reports = Array.from({ length: 40 }, (_, turn) => ({ atMs: start + turn * 60_000, values }))
    expect(JSON.stringify(senmlPack(reports)).length).toBeLessThan(48 * 1024)
  })
})
