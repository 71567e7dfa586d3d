import type { Knex } from 'knex'
import { Slug } from '#shared/contract/common.ts'
import type { SiteSource } from '#shared/contract/endpoint.ts'
import type { Site } from '#shared/contract/site.ts'
import type { Role } from '#shared/domain/permissions.ts'
import type { Person, SiteContext } from '../../http/mount.ts'
import { siteRepository } from './repository.ts'

export type SiteService = ReturnType<typeof createSiteService>

/** The largest number that a row can have. */
const largestId = 2 ** 31 - 1

export function createSiteService({ db }: { db: Knex }) {
  const sites = siteRepository(db)
  return {
    /** The sites where a person has a role, and the roles. */
    async listOf(person: Person): Promise<(Site & { roles: Role[] })[]> {
      const found = await sites.byIds([...person.rolesBySite.keys()])
      return found.map((site) => ({ ...site, roles: [...(person.rolesBySite.get(site.id) ?? [])] }))
    },

    /** The site that a path parameter's value belongs to; undefined when there is none or the value makes no sense. */
    siteOf: async (source: SiteSource, value: string): Promise<SiteContext | undefined> => {
      if (source === 'site') return Slug.safeParse(value).success ? sites.bySlug(value) : undefined
      const id = /^\d{1,10}$/.test(value) ? Number(value) : 0
      return id >= 1 && id <= largestId ? sites.ofThing(source, id) : undefined
    },

    firstName: () => sites.firstName(),
  }
}
