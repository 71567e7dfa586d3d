import type { z } from 'zod'
import { badRequest, type FieldError } from './problem.ts'

/** Where a part of a request came from. */
export type InputPart = 'path' | 'query' | 'body'

/**
 * Parses a part of a request with its schema.
 * @throws HttpProblem 400 that names every field that was wrong, in words: `name` in the body, `?limit` in the query,
 *   `:site` in the path
 */
export function parseInput<T extends z.ZodType>(part: InputPart, schema: T, value: unknown): z.output<T> {
  const parsed = schema.safeParse(emptyIsNothing(schema, value), { error: inWords })
  if (parsed.success) return parsed.data
  const errors = parsed.error.issues.map((issue) => ({
    at: placeOf(part, issue.path),
    message: issue.message,
  }))
  throw badRequest(summaryOf(errors), errors)
}

/** Many clients send `{}` where nothing is wanted: that is nothing. */
function emptyIsNothing(schema: z.ZodType, value: unknown): unknown {
  const isEmpty = typeof value === 'object' && value !== null && Object.keys(value).length === 0
  return isEmpty && !Array.isArray(value) && schema.safeParse(undefined).success ? undefined : value
}

const marks = { path: ':', query: '?', body: '' } as const

function placeOf(part: InputPart, path: readonly PropertyKey[]): string {
  return marks[part] + path.map(String).join('.')
}

function summaryOf(errors: readonly FieldError[]): string {
  const first = errors.slice(0, 3).map(({ at, message }) => (at ? `${at}: ${message}` : message))
  const more = errors.length - first.length
  return first.join(' ') + (more > 0 ? ` And ${more} more.` : '')
}

/** Messages for what a schema does not word itself. */
const inWords: z.core.$ZodErrorMap = (issue) => {
  switch (issue.code) {
    case 'invalid_type':
      return issue.input === undefined
        ? 'This is missing.'
        : `This must be ${typeNames[issue.expected] ?? issue.expected}.`
    case 'invalid_value':
      return issue.values.length === 1
        ? `This must be ${String(issue.values[0])}.`
        : `This must be one of: ${issue.values.map(String).join(', ')}.`
    case 'invalid_format':
      return formatNames[issue.format] ?? 'This is not in the form that is wanted.'
    case 'too_small':
      return `${bounded(issue.origin, issue.inclusive === false ? 'more than' : 'at least', issue.minimum)}.`
    case 'too_big':
      return `${bounded(issue.origin, issue.inclusive === false ? 'less than' : 'at most', issue.maximum)}.`
    case 'unrecognized_keys':
      return `There is no field called ${issue.keys.join(' or ')} here.`
    case 'invalid_union':
      return issue.discriminator === undefined
        ? 'This fits none of the forms that are taken.'
        : `There is no such ${issue.discriminator}.`
    default:
      return undefined
  }
}

const typeNames: Record<string, string> = {
  string: 'text',
  number: 'a number',
  int: 'a whole number',
  boolean: 'true or false',
  array: 'a list',
  object: 'an object',
  undefined: 'left out',
}

const formatNames: Record<string, string> = {
  datetime: 'Write a time with its zone, such as 2026-12-01T04:35:00Z.',
  date: 'Write a date such as 2026-12-01.',
  email: 'Write an address like name@example.com.',
  uuid: 'This must be a UUID.',
}

function bounded(origin: string, how: string, bound: number | bigint): string {
  if (origin === 'string') return `This must have ${how} ${bound} characters`
  if (origin === 'array') return `This must have ${how} ${bound} entries`
  return `This must be ${how} ${bound}`
}
