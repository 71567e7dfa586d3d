import { describe, expect, it } from 'vitest'
import { createTexts } from '@/locales/index.ts'
import { NewCooker } from '@/shared/contract/cooker.ts'
import { NewPiece } from '@/shared/contract/piece.ts'
import { SignIn } from '@/shared/contract/session.ts'
import { createFormat } from './format.ts'
import { fieldOf, issueWords } from './issue-words.ts'
import type { z } from 'zod'

const cooker = {
  name: 'North Offset',
  kind: 'offset',
  capacity: 8,
  pitSetC: 121,
  bandLowC: 112,
  bandHighC: 130,
}

describe('a schema’s complaint', () => {
  it('tells the limit of a temperature in the person’s own unit', () => {
    expect(complaint(NewCooker, { ...cooker, pitSetC: 700 })).toBe('pitSetC: At most 1112 °F.')
    expect(complaint(NewCooker, { ...cooker, pitSetC: 700 }, 'si')).toBe('pitSetC: At most 600 °C.')
  })

  it('tells that a weight must be more than nothing', () => {
    expect(complaint(NewPiece.pick({ rawKg: true }), { rawKg: 0 })).toBe('rawKg: More than 0.0 lb.')
  })

  it('leaves a count as it is', () => {
    expect(complaint(NewCooker, { ...cooker, capacity: 0 })).toBe('capacity: At least 1.')
  })

  it('says what is missing', () => {
    expect(complaint(NewCooker, { ...cooker, name: ' ' })).toBe('name: Fill this in.')
    expect(complaint(NewCooker, { ...cooker, capacity: null })).toBe('capacity: Fill this in.')
  })

  it('says what a name may be, and how an address looks', () => {
    expect(complaint(NewPiece.pick({ label: true }), { label: 'x'.repeat(25) })).toBe(
      'label: At most 24 characters.',
    )
    expect(complaint(SignIn, { email: 'odell', password: 'x' })).toBe(
      'email: Write the address like name@example.com.',
    )
  })

  it('has words of its own for a band that stands upside down', () => {
    expect(complaint(NewCooker, { ...cooker, bandLowC: 140 })).toBe(
      'bandLowC: The low end must lie below the high end.',
    )
  })
})

function complaint(schema: z.ZodType, value: unknown, units: 'us' | 'si' = 'us'): string {
  const texts = createTexts('en').global
  const words = (key: string, values?: Record<string, unknown>) => texts.t(key, values ?? {})
  const format = createFormat({ locale: 'en-US', units, timeZone: 'UTC', now: () => 0, words })
  const [issue] = schema.safeParse(value).error?.issues ?? []
  if (issue === undefined) throw new Error('nothing was found wrong')
  return `${fieldOf(issue)}: ${issueWords(issue, words, format).replaceAll('\u00a0', ' ')}`
}
