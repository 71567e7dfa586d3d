import { pino } from 'pino'
import { afterEach, beforeEach, expect, it, vi } from 'vitest'
import { every } from './every.ts'

beforeEach(() => void vi.useFakeTimers())
afterEach(() => void vi.useRealTimers())

const log = pino({ level: 'silent' })

it('runs at once and then after each pause', async () => {
  let runs = 0
  const stop = every({ name: 'x', intervalMs: 1000, log }, async () => {
    runs += 1
    await Promise.resolve()
  })
  await vi.advanceTimersByTimeAsync(0)
  expect(runs).toBe(1)
  await vi.advanceTimersByTimeAsync(2500)
  expect(runs).toBe(3)
  await stop()
  await vi.advanceTimersByTimeAsync(5000)
  expect(runs).toBe(3)
})

it('never runs twice at once', async () => {
  let running = 0
  let most = 0
  const stop = every({ name: 'slow', intervalMs: 10, log }, async () => {
    running += 1
    most = Math.max(most, running)
    await new Promise((resolve) => setTimeout(resolve, 100))
    running -= 1
  })
  await vi.advanceTimersByTimeAsync(1000)
  expect(most).toBe(1)
  const stopped = stop()
  await vi.advanceTimersByTimeAsync(200)
  await stopped
  expect(running).toBe(0)
})

it('goes on after a run that failed, and says so', async () => {
  const lines: string[] = []
  let runs = 0
  const stop = every(
    { name: 'The task', intervalMs: 1000, log: pino({}, { write: (line) => lines.push(line) }) },
    () => {
      runs += 1
      return runs === 1 ? Promise.reject(new Error('not now')) : Promise.resolve()
    },
  )
  await vi.advanceTimersByTimeAsync(1500)
  expect(runs).toBe(2)
  expect(lines.join('')).toContain('The task failed')
  await stop()
})
