import { usualRestMs } from '@/shared/domain/next-actions.ts'
import type { Urgency } from '@/shared/domain/pit-state.ts'

/**
 * Whether a piece will be ready for its service: it has to be pulled and rested (about an hour, common practice)
 * by then. `now` when the median comes too late, `soon` when only the late end of the 80 % does.
 */
export function serviceRisk(
  pull: { p50: number; p90: number } | null,
  servesAt: number | null,
): Urgency | null {
  if (pull === null || servesAt === null) return null
  if (pull.p50 + usualRestMs > servesAt) return 'now'
  return pull.p90 + usualRestMs > servesAt ? 'soon' : null
}
