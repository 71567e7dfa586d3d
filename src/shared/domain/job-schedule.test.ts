import { expect, it } from 'vitest'
import { isTurn, jobTurns, nextTurn } from './job-schedule.ts'

const at = (text: string) => Date.parse(`2026-12-01T${text}Z`)

it.each(Object.entries(jobTurns))('the turns of %s fill the day evenly', (_, turns) => {
  if (turns === null) return
  const minutes = Array.from({ length: 1440 }, (_, minute) => minute).filter((minute) =>
    isTurn(turns, minute),
  )
  expect(1440 % turns.everyMin).toBe(0)
  expect(minutes).toHaveLength(1440 / turns.everyMin)
  // The same turns, one after the other, from midnight on.
  let moment = at('00:00:00') - 1
  for (const minute of minutes) {
    moment = nextTurn(turns, moment)
    expect(moment).toBe(at('00:00:00') + minute * 60_000)
  }
})

it('a turn that is now is not the next one', () => {
  const hourly = { everyMin: 60, offsetMin: 7 }
  expect(nextTurn(hourly, at('04:06:59.999'))).toBe(at('04:07:00'))
  expect(nextTurn(hourly, at('04:07:00'))).toBe(at('05:07:00'))
  expect(nextTurn({ everyMin: 1440, offsetMin: 190 }, at('23:59:00'))).toBe(at('03:10:00') + 24 * 3600_000)
})
