import { pino } from 'pino'
import { describe, expect, test } from 'vitest'
import { createRetry } from './retry.ts'

const coded = (code: string) => Object.assign(new Error('as PostgreSQL says it'), { code })

function made() {
  const lines: string[] = []
  const log = pino({ level: 'info' }, { write: (line: string) => lines.push(line) })
  return { retry: createRetry({ log, waiting: () => 7 }), lines }
}

/** Fails so often with this, then works. */
function failing(times: number, error: Error) {
  let tries = 0
  return () => (++tries <= times ? Promise.reject(error) : Promise.resolve(tries))
}

describe('createRetry', () => {
  test.each(['ECONNREFUSED', '57P01', '57P03', '53300', '40P01', '53100', '25006'])(
    'tries again after %s, and tells of an outage once at its beginning and once at its end',
    async (code) => {
      const { retry, lines } = made()
      expect(retry.ok()).toBe(true)
      expect(await retry.until(failing(2, coded(code)))).toBe(3)
      expect(retry.ok()).toBe(true)
      expect(lines).toHaveLength(2)
    },
  )

  test.each(['23503', '22P02', '42P01'])('does not try again after %s', async (code) => {
    const { retry, lines } = made()
    await expect(retry.until(failing(1, coded(code)))).rejects.toMatchObject({ code })
    expect(lines).toEqual([])
  })

  test('is not ok during an outage, and ends it when it is stopped', async () => {
    const { retry } = made()
    const waiting = retry.until(failing(1_000, coded('ECONNREFUSED')))
    await new Promise((resolve) => setTimeout(resolve, 10))
    expect(retry.ok()).toBe(false)
    retry.stop()
    await expect(waiting).rejects.toMatchObject({ code: 'ECONNREFUSED' })
  })
})
