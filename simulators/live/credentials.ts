import { Slug } from '#shared/contract/common.ts'
import { z } from 'zod'

/** What the fleet signs in with: one line of JSON on standard input, or a file that nobody else may read. */
export const FleetCredentials = z.strictObject({
  devices: z.array(
    z.strictObject({ site: Slug, device: Slug, username: z.string().min(1), secret: z.string().min(1) }),
  ),
  /** Reads the night; with `works` it also does what the crew would do. */
  crew: z.strictObject({ email: z.email(), password: z.string().min(1), works: z.boolean().default(true) }),
})
export type FleetCredentials = z.infer<typeof FleetCredentials>
