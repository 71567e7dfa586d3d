import type { ErrorRequestHandler, Response } from 'express'
import { z } from 'zod'
import type { Problem } from '#shared/contract/common.ts'
import { isDatabaseAway } from '../db/database-away.ts'
import { HttpProblem, badRequest, unavailable } from './problem.ts'

/** Where what must not be told is written. */
export interface ErrorLog {
  error(details: object, message: string): void
  warn(details: object, message: string): void
}

/**
 * The one place where errors become answers, as RFC 9457 problem details. What the caller did (4xx) is told in words;
 * what went wrong here (5xx) is logged under the request's number and hidden.
 */
export function errorHandler(log: ErrorLog): ErrorRequestHandler {
  return (error: unknown, request, response, next) => {
    if (response.headersSent) {
      next(error)
      return
    }
    const problem = asProblem(error)
    const number = typeof request.id === 'object' ? '' : request.id
    if (!problem) {
      log.error(
        { err: error, request: number, method: request.method, path: request.path },
        'A request failed',
      )
    } else if (problem.status >= 500) {
      log.warn({ err: error, request: number }, problem.title)
    }
    sendProblem(response, problem ?? hidden(number))
  }
}

function hidden(requestNumber: string | number): HttpProblem {
  return new HttpProblem(
    500,
    'Something went wrong here',
    `It is in the server’s log under ${requestNumber}.`,
  )
}

/** Answers with a problem. */
export function sendProblem(response: Response, problem: HttpProblem): void {
  const body: Problem = { type: 'about:blank', title: problem.title, status: problem.status }
  if (problem.detail !== undefined) body.detail = problem.detail
  if (problem.errors !== undefined) body.errors = problem.errors
  response
    .status(problem.status)
    .set('Cache-Control', 'no-store')
    .type('application/problem+json')
    .end(JSON.stringify(body))
}

function asProblem(error: unknown): HttpProblem | undefined {
  if (error instanceof HttpProblem) return error
  if (isDatabaseAway(error))
    return unavailable('The database does not answer. Nothing was changed; try again shortly.')
  return databaseRefusal(error) ?? bodyProblem(error)
}

/** Values that pass the contract and still have no place in a column (SQLSTATE classes of PostgreSQL). */
function databaseRefusal(error: unknown): HttpProblem | undefined {
  const code = z.object({ code: z.string() }).safeParse(error).data?.code
  if (code === '22003') return badRequest('A number is larger than anything kept here.')
  if (code === '22021') return badRequest('A text holds a character that cannot be kept (U+0000).')
  return undefined
}

/** What reading a body (or a broken URL) throws: errors with a status, made by Express and its body parser. */
const BodyError = z.object({ status: z.int().min(400).max(499), type: z.string().optional() })

function bodyProblem(error: unknown): HttpProblem | undefined {
  const parsed = BodyError.safeParse(error)
  if (!parsed.success) return undefined
  const { status, type } = parsed.data
  switch (type) {
    case 'entity.parse.failed':
      return badRequest('The body is not JSON.')
    case 'entity.too.large':
      return new HttpProblem(413, 'Too large', 'The body is larger than what is taken here.')
    case 'encoding.unsupported':
    case 'charset.unsupported':
      return new HttpProblem(415, 'Unknown encoding', 'Send JSON in UTF-8.')
    default:
      return new HttpProblem(status, 'That request cannot be read')
  }
}
