import type { z } from 'zod'
import type { Format } from './format.ts'

type Words = (key: string, values: Record<string, unknown>) => string

/** What a schema found wrong with a field. */
export type Issue = z.core.$ZodIssue

/**
 * A schema's complaint about a field, in the person's language and units: a limit of a field that is named for its
 * unit (`…C`, `…Kg`) is told in what the person reads, not in °C and kg.
 */
export function issueWords(issue: Issue, t: Words, format: Pick<Format, 'temperature' | 'mass'>): string {
  const limit = (value: number | bigint) => limitWords(fieldOf(issue), Number(value), format)
  switch (issue.code) {
    case 'invalid_type':
      return t('errors.field.required', {})
    case 'too_small':
      if (issue.origin === 'string' && Number(issue.minimum) <= 1) return t('errors.field.required', {})
      return t(issue.inclusive === false ? 'errors.field.above' : 'errors.field.tooSmall', {
        minimum: limit(issue.minimum),
      })
    case 'too_big':
      return issue.origin === 'string'
        ? t('errors.field.tooLong', { maximum: Number(issue.maximum) })
        : t('errors.field.tooBig', { maximum: limit(issue.maximum) })
    case 'invalid_format':
      return issue.format === 'email' ? t('errors.field.email', {}) : t('errors.field.form', {})
    case 'custom':
      // The one rule between two fields so far; a rule without words of its own would say "check this field".
      return fieldOf(issue) === 'bandLowC' ? t('errors.field.bandOrder', {}) : t('errors.field.form', {})
    default:
      return t('errors.field.form', {})
  }
}

/** The field that an issue is about: the last name in its path, as in `fact.kg`. */
export function fieldOf(issue: Issue): string {
  return String(issue.path.at(-1) ?? '')
}

function limitWords(field: string, value: number, format: Pick<Format, 'temperature' | 'mass'>): string {
  if (field.endsWith('C')) return format.temperature(value)
  if (/kg$/i.test(field)) return format.mass(value)
  return String(value)
}
