import { pino } from 'pino'
import { expect, it } from 'vitest'
import type { RunsToKeep } from '../features/jobs/service.ts'
import { createRunLog } from './run-log.ts'

const log = pino({ level: 'silent' })

it('adds up what ran of each kind, with the last failure’s first line', async () => {
  const kept: RunsToKeep[] = []
  const runs = createRunLog({
    log,
    keep: (more) => {
      kept.push(...more)
      return Promise.resolve()
    },
  })
  runs.note('forecast', 12)
  runs.note('forecast', 15, new Error('No readings\n  at line 7'))
  runs.note('forecast', 9)
  runs.note('learning', 1000)
  await runs.stop()
  expect(kept).toEqual([
    { kind: 'forecast', runs: 3, failed: 1, lastMs: 9, lastError: 'No readings' },
    { kind: 'learning', runs: 1, failed: 0, lastMs: 1000, lastError: null },
  ])
  await runs.stop()
  expect(kept).toHaveLength(2)
})

it('warns, and goes on, when it cannot be written down', async () => {
  const lines: string[] = []
  let tries = 0
  const runs = createRunLog({
    log: pino({}, { write: (line) => lines.push(line) }),
    keep: () => {
      tries += 1
      return tries === 1 ? Promise.reject(new Error('away')) : Promise.resolve()
    },
    gatherMs: 1,
  })
  runs.note('thinning', 5)
  await expect.poll(() => lines.join('')).toContain('could not be written down')
  runs.note('thinning', 5)
  await expect.poll(() => tries).toBe(2)
})
