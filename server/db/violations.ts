import { z } from 'zod'

const Violation = z.object({ code: z.string(), constraint: z.string() })

/** Whether an error is PostgreSQL's unique_violation (SQLSTATE 23505) of a constraint or index. */
export function isUniqueViolation(error: unknown, constraint: string): boolean {
  return isViolation(error, '23505', constraint)
}

/** Whether an error is PostgreSQL's exclusion_violation (SQLSTATE 23P01) of a constraint. */
export function isExclusionViolation(error: unknown, constraint: string): boolean {
  return isViolation(error, '23P01', constraint)
}

function isViolation(error: unknown, code: string, constraint: string): boolean {
  const parsed = Violation.safeParse(error)
  return parsed.success && parsed.data.code === code && parsed.data.constraint === constraint
}
