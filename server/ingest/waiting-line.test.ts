import { describe, expect, test } from 'vitest'
import { createJob } from './job.ts'
import { createWaitingLine } from './waiting-line.ts'

const now = 1_800_000_000_000
const hourMs = 3_600_000

function job(name: string, readings: number, ageMs = 0, deviceId = 1) {
  return createJob(
    { sender: { deviceId, siteSlug: 'quarry-road' }, topic: name, receivedAtMs: now, acceptedAt: 0 },
    {
      readings: Array.from({ length: readings }, (_, index) => ({
        channelId: 1,
        atMs: now - ageMs - index,
        value: 1,
        celsius: 1,
        receivedAtMs: now,
      })),
      refused: [],
      batteryPercent: undefined,
      signalDbm: undefined,
    },
  ).job
}
const made = (limits = { maxRows: 100, lateRows: 20 }) => createWaitingLine(limits)
const taken = (line: ReturnType<typeof made>) =>
  line.take()?.slices.map(({ job: { topic }, from, to }) => [topic, from, to])

describe('createWaitingLine', () => {
  test('takes messages in order, up to the size of a batch', () => {
    const line = made()
    for (const name of ['a', 'b', 'c']) line.add(job(name, 40), 0)
    expect(taken(line)).toEqual([
      ['a', 0, 40],
      ['b', 0, 40],
      ['c', 0, 20],
    ])
    expect(line.size()).toEqual({ readings: 20, messages: 1 })
    expect(taken(line)).toEqual([['c', 20, 40]])
    expect(taken(line)).toBeUndefined()
  })

  test('takes only slices of old or large packs, after the live messages', () => {
    const line = made()
    line.add(job('large', 300), 0)
    line.add(job('old', 50, hourMs), 0)
    line.add(job('live', 10), 0)
    expect(taken(line)).toEqual([
      ['live', 0, 10],
      ['large', 0, 20],
    ])
    expect(taken(line)).toEqual([['large', 20, 40]])
    line.add(job('live again', 90), 0)
    expect(taken(line)).toEqual([
      ['live again', 0, 90],
      ['large', 40, 50],
    ])
    for (let from = 50; from < 290; from += 20) expect(taken(line)).toEqual([['large', from, from + 20]])
    expect(taken(line)).toEqual([
      ['large', 290, 300],
      ['old', 0, 10],
    ])
  })

  test('a message with one fresh reading is live', () => {
    const line = made()
    line.add(job('large', 300), 0)
    const mixed = job('mixed', 30, hourMs)
    line.add({ ...mixed, readings: [...mixed.readings, ...job('fresh', 1).readings] }, 0)
    expect(taken(line)?.[0]).toEqual(['mixed', 0, 31])
  })

  test('messages without a reading are taken too', () => {
    const line = made()
    line.add(job('only refused', 0), 0)
    expect(taken(line)).toEqual([['only refused', 0, 0]])
  })

  test('knows since when something waits', () => {
    const line = made()
    expect(line.waitingSince()).toBeUndefined()
    line.add(job('a', 150), 20)
    line.add(job('b', 1), 30)
    expect(line.waitingSince()).toBe(20)
    line.take()
    expect(line.waitingSince()).toBe(-Infinity)
    line.take()
    expect(line.waitingSince()).toBeUndefined()
  })

  test('devices take turns: one that floods holds up no other', () => {
    const line = made({ maxRows: 4, lateRows: 1 })
    for (let index = 0; index < 10; index++) line.add(job(`flood ${index}`, 1, 0, 1), 0)
    line.add(job('quiet', 1, 0, 2), 0)
    line.add(job('calm', 1, 0, 3), 0)
    expect(taken(line)?.map(([name]) => name)).toEqual(['flood 0', 'quiet', 'calm', 'flood 1'])
    expect(taken(line)?.map(([name]) => name)).toEqual(['flood 2', 'flood 3', 'flood 4', 'flood 5'])
  })

  test('gives back what waits, and is empty then', () => {
    const line = made()
    line.add(job('a', 150), 0)
    line.take()
    line.add(job('b', 1), 0)
    expect(line.drain().map(({ topic }) => topic)).toEqual(['a', 'b'])
    expect(line.size()).toEqual({ readings: 0, messages: 0 })
  })

  test('stays the same over many messages', () => {
    const line = made({ maxRows: 7, lateRows: 2 })
    const names: string[] = []
    for (let index = 0; index < 5_000; index++) line.add(job(String(index), 1), 0)
    for (let batch = line.take(); batch; batch = line.take()) {
      names.push(...batch.slices.map(({ job: { topic } }) => topic))
    }
    expect(names).toEqual(Array.from({ length: 5_000 }, (_, index) => String(index)))
  })
})
