import { expect, it } from 'vitest'
import { nextStep } from './next-step.ts'

const now = Date.parse('2026-12-01T08:00:00Z')
const piece = (id: number, stage: 'cooking' | 'wrapped' | 'done', label = `N${id}`) => ({
  ...{ id, label, stage, cookerId: 1, wrapMethod: 'paper' as const, pulledAt: null, restAt: null },
})
const reach = (p50: string) => ({ p10: p50, p50, p90: p50 })
const forecast = (pieceId: number, wrap: string | null, pull: string) => ({
  pieceId,
  madeAt: '2026-12-01T07:59:00Z',
  phase: 'stall' as const,
  wrap: wrap === null ? null : reach(wrap),
  wrapReachedAt: null,
  pull: reach(pull),
})

it('is the earliest of all pieces, to the minute', () => {
  const forecasts = new Map([
    [1, forecast(1, '2026-12-01T10:20:40Z', '2026-12-01T15:00:00Z')],
    [2, forecast(2, null, '2026-12-01T09:15:59Z')],
  ])
  const pieces = [piece(1, 'cooking'), piece(2, 'wrapped')]
  expect(nextStep(pieces, forecasts, now)).toEqual({
    kind: 'pull',
    subject: 'N2',
    at: Date.parse('2026-12-01T09:15:00Z'),
  })
  expect(nextStep([piece(1, 'cooking')], forecasts, now)).toMatchObject({ kind: 'wrap', subject: 'N1' })
})

it('is nothing without a forecast or with everything done', () => {
  expect(nextStep([piece(1, 'cooking')], new Map(), now)).toBeNull()
  expect(nextStep([piece(1, 'done')], new Map(), now)).toBeNull()
})
