import { z } from 'zod'

/**
 * One SenML record as sent (RFC 8428, JSON, section 4.3): base fields and a reading. Unknown labels that end in
 * an underscore must be understood or the pack refused (section 4.4); others are ignored.
 */
export const SenmlRecord = z.looseObject({
  bver: z.int().optional(),
  bn: z.string().max(200).optional(),
  bt: z.number().optional(),
  bu: z.string().max(20).optional(),
  bv: z.number().optional(),
  n: z.string().max(200).optional(),
  u: z.string().max(20).optional(),
  v: z.number().optional(),
  vs: z.string().optional(),
  vb: z.boolean().optional(),
  vd: z.string().optional(),
  s: z.number().optional(),
  t: z.number().optional(),
  ut: z.number().optional(),
})
export type SenmlRecord = z.infer<typeof SenmlRecord>

/** More short records than the largest packet holds. */
export const maxPackRecords = 3000

/** A pack: at least one record. */
export const SenmlPack = z.array(SenmlRecord).min(1).max(maxPackRecords)

/** Units a device may send. */
export const senmlUnits = ['Cel', 'Ohm', 'V', '%EL', 'dBm'] as const
