import { z } from 'zod'

const withCode = z.object({ code: z.string() })

/** The code of a system's or PostgreSQL's error (`ENOENT`, `28P01`), else its text. */
export function errorCode(error: unknown): string {
  const parsed = withCode.safeParse(error)
  return parsed.success ? parsed.data.code : String(error)
}
