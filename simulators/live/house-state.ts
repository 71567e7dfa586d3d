import type { CookEvent } from '#shared/contract/event.ts'
import type { Recipe } from '#shared/contract/piece.ts'
import type { Tonight } from '#shared/contract/site.ts'

/** What the HTTP API said of a site: its running night and, by piece, what was logged on it. */
export interface SiteState {
  tonight: Tonight
  events: ReadonlyMap<number, readonly CookEvent[]>
  recipes: readonly Recipe[]
}

/** Everything that the live house needs to know, as one text: it is built anew when this changes. */
export function fingerprint(states: readonly SiteState[]): string {
  return JSON.stringify(
    states.map(({ tonight, events }) => [
      tonight.site.slug,
      tonight.cookers.map(({ id, name, kind }) => [id, name, kind]),
      tonight.pieces.map(({ id, label, rawKg, cured }) => [id, label, rawKg, cured]),
      [...events].map(([pieceId, logged]) => [
        pieceId,
        logged.map(({ id, correctedById }) => [id, correctedById]),
      ]),
    ]),
  )
}
