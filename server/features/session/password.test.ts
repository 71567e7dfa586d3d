import { performance } from 'node:perf_hooks'
import { expect, it } from 'vitest'
import { createPasswords } from './password.ts'

const passwords = createPasswords(8)

it('knows a password again and no other', async () => {
  const stored = await passwords.hash('oak and hickory')
  expect(await passwords.matches('oak and hickory', stored)).toBe(true)
  expect(await passwords.matches('oak and mesquite', stored)).toBe(false)
  expect(stored).toMatch(/^\$2[aby]\$08\$/)
})

it('matches nothing when there is nothing to match', async () => {
  expect(await passwords.matches('', undefined)).toBe(false)
  expect(await passwords.matches('oak and hickory', undefined)).toBe(false)
})

it('takes as long for an unknown address as for a wrong password', async () => {
  const stored = await passwords.hash('oak and hickory')
  await passwords.matches('x', undefined)
  const times = { known: Infinity, unknown: Infinity }
  // The shortest of several: what else the machine does only adds to a time.
  for (let round = 0; round < 5; round++) {
    times.known = Math.min(times.known, await duration(() => passwords.matches('x', stored)))
    times.unknown = Math.min(times.unknown, await duration(() => passwords.matches('x', undefined)))
  }
  expect(times.unknown / times.known).toBeGreaterThan(0.6)
  expect(times.unknown / times.known).toBeLessThan(1.7)
})

async function duration(work: () => Promise<unknown>): Promise<number> {
  const begun = performance.now()
  await work()
  return performance.now() - begun
}
