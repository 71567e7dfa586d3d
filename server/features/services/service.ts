import type { Knex } from 'knex'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Service } from '#shared/contract/site.ts'
import { businessDay } from '#shared/domain/business-day.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { Person, SiteContext } from '../../http/mount.ts'
import { conflict } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import { servicesRepository } from './repository.ts'

export interface ServicesDeps {
  db: Knex
  clock: Clock
  publish: (siteSlug: string, changes: LiveChanges) => void
}

export type ServicesService = ReturnType<typeof createServicesService>

/** The hours at which a site serves. */
export function createServicesService({ db, clock, publish }: ServicesDeps) {
  return {
    /** @throws HttpProblem 409 when the site serves at that moment already */
    async add(
      { person, site }: { person: Person; site: SiteContext },
      wanted: { servesAt: string; portions: number; note?: string | undefined },
    ): Promise<Service> {
      const servesAt = Date.parse(wanted.servesAt)
      const service = await db.transaction(async (trx) => {
        const services = servicesRepository(trx)
        const id = await services.add({
          siteId: site.id,
          date: businessDay(servesAt, site.timeZone),
          servesAt,
          portions: wanted.portions,
          note: wanted.note === undefined || wanted.note === '' ? null : wanted.note,
        })
        const added = id === undefined ? undefined : await services.find(id)
        if (!added) {
          const message = 'There is a service at that hour already.'
          throw conflict(message, [{ at: 'servesAt', message }])
        }
        await recordAudit(trx, {
          at: clock.now(),
          userId: person.userId,
          siteId: site.id,
          action: 'service.add',
          subject: `service ${added.id}`,
          data: { ...added },
        })
        return added
      })
      publish(site.slug, { services: [service] })
      return service
    },

    /** The services of a span (ms since 1970 UTC), in time order. */
    between: (siteId: number, fromMs: number, toMs: number): Promise<Service[]> =>
      servicesRepository(db).between(siteId, fromMs, toMs),
  }
}
