import type { Problem } from '@/shared/contract/common.ts'

/** Why a call failed, as far as the person must be told. */
export type ProblemKind =
  | 'offline'
  | 'signed-out'
  | 'forbidden'
  | 'not-found'
  | 'conflict'
  | 'invalid'
  | 'too-many'
  | 'server'
  | 'unreadable'

/**
 * A call that did not give its answer. `message` is the server's own sentence where there is one; `kind` chooses
 * the words of ours (`errors.<kind>`), and `fields` says what was wrong with which field.
 */
export class ApiProblem extends Error {
  override readonly name = 'ApiProblem'
  readonly kind: ProblemKind
  /** The HTTP status; 0 when no answer came at all. */
  readonly status: number
  readonly fields: readonly { at: string; message: string }[]
  /** The problem's type (RFC 9457), for what the page treats in a way of its own. */
  readonly type: string | undefined

  constructor(kind: ProblemKind, status: number, problem?: Problem, options?: ErrorOptions) {
    super(problem?.detail ?? problem?.title ?? kind, options)
    this.kind = kind
    this.status = status
    this.fields = problem?.errors ?? []
    this.type = problem?.type
  }
}

/** What kind of problem an HTTP status is. */
export function problemKind(status: number): ProblemKind {
  if (status === 401) return 'signed-out'
  if (status === 403) return 'forbidden'
  if (status === 404) return 'not-found'
  // 412: someone else changed it first (RFC 9110, 15.5.13); 428: no If-Match was sent (RFC 6585, 3).
  if (status === 409 || status === 412 || status === 428) return 'conflict'
  if (status === 400 || status === 413 || status === 422) return 'invalid'
  if (status === 429) return 'too-many'
  return 'server'
}
