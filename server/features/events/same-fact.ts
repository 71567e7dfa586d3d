import { isDeepStrictEqual } from 'node:util'
import type { EventFact } from '#shared/contract/event.ts'

/** Whether two facts say the same, whatever the order of their fields; a field that is undefined is not there. */
export function isSameFact(one: EventFact, other: EventFact): boolean {
  return isDeepStrictEqual(said(one), said(other))
}

function said(fact: EventFact): Map<string, unknown> {
  return new Map(Object.entries(fact).filter(([, value]) => value !== undefined))
}
