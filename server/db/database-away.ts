import { z } from 'zod'

/**
 * Whether an error says that the database cannot be reached just now, rather than that a statement was wrong:
 * PostgreSQL's SQLSTATE classes 08 (connection), 53300 (too many connections) and 57P01 to 57P03 (shutting down or
 * starting), a socket's own codes, the driver's broken connection and the pool's time-out. Knex
 * puts the statement and a dash before the driver's words.
 */
export function isDatabaseAway(error: unknown): boolean {
  const parsed = ErrorLike.safeParse(error)
  if (!parsed.success) return false
  const { code = '', name = '', message = '' } = parsed.data
  return (
    /^(08...|53300|57P0[123])$/.test(code) ||
    socketCodes.has(code) ||
    name === 'KnexTimeoutError' ||
    /(?:^| - )(?:Connection terminated|Client has encountered a connection error|timeout exceeded when trying to connect)/.test(
      message,
    )
  )
}

const ErrorLike = z.object({
  code: z.string().optional(),
  name: z.string().optional(),
  message: z.string().optional(),
})

const socketCodes = new Set([
  'ECONNREFUSED',
  'ECONNRESET',
  'EPIPE',
  'ETIMEDOUT',
  'ENOENT',
  'EHOSTUNREACH',
  'ENOTFOUND',
])
