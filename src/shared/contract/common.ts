import { z } from 'zod'

/** A moment, RFC 3339 with a zone; the server always answers in UTC. */
export const Instant = z.iso
  .datetime({ offset: true })
  .meta({ id: 'Instant', example: '2026-12-01T04:35:00.000Z' })

/** The number of a row. In a path it arrives as text. */
const maxId = 2 ** 31 - 1
export const Id = z.int().positive().max(maxId)
export const PathId = z.coerce.number().int().positive().max(maxId)

export const Slug = z
  .string()
  .regex(/^[a-z0-9]+(-[a-z0-9]+)*$/, 'lower-case letters, digits and single hyphens')
  .max(40)

export const Nothing = z.strictObject({})
export const NoBody = z.undefined()

export const Celsius = z.number().min(-60).max(600)
export const Kilograms = z.number().positive().max(200)

/** RFC 9457 problem details: what every error looks like. */
export const Problem = z
  .object({
    type: z.string(),
    title: z.string(),
    status: z.int(),
    detail: z.string().optional(),
    instance: z.string().optional(),
    /** Which fields were wrong and why, in words. */
    errors: z.array(z.object({ at: z.string(), message: z.string() })).optional(),
  })
  .meta({ id: 'Problem' })
export type Problem = z.infer<typeof Problem>

/** A page of a list; `nextCursor` is null on the last one. */
export function pageOf<T extends z.ZodType>(item: T) {
  return z.object({ items: z.array(item), nextCursor: z.string().nullable() })
}

/** Path parameters that several nouns share. */
export const SiteParams = z.object({ site: Slug })

/** Query of a cursor page. */
export const PageQuery = z.object({
  cursor: z.string().max(200).optional(),
  limit: z.coerce.number().int().min(1).max(500).default(50),
})
