import { eventEndpoints } from '#shared/contract/event.ts'
import type { Mount } from '../../http/mount.ts'
import type { EventsService } from './service.ts'

export function eventRoutes(mount: Mount, { events }: { events: EventsService }): void {
  mount(eventEndpoints.ofPiece, async ({ params }) => ({ items: await events.ofPiece(params.pieceId) }))
  mount(eventEndpoints.logOnPiece, ({ person, site, params, body }) =>
    events.logOnPiece({ person, site }, params.pieceId, body),
  )
  mount(eventEndpoints.logOnCooker, ({ person, site, params, body }) =>
    events.logOnCooker({ person, site }, params.cookerId, body),
  )
}
