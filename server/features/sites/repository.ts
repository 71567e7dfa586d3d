import type { Knex } from 'knex'
import { z } from 'zod'
import type { Site } from '#shared/contract/site.ts'
import type { SiteContext } from '../../http/mount.ts'

const ContextRow = z.object({ id: z.int(), slug: z.string(), name: z.string(), timeZone: z.string() })
const SiteRow = ContextRow.extend({ elevationM: z.number() })

const contextColumns = { id: 'sites.id', slug: 'sites.slug', name: 'sites.name', timeZone: 'sites.time_zone' }

/** Things that belong to a site, and so say whose rules apply to them. */
export type SiteThing = 'pieceId' | 'cookerId' | 'channelId' | 'deviceId'

export function siteRepository(db: Knex) {
  const context = async (query: Knex.QueryBuilder): Promise<SiteContext | undefined> => {
    const row: unknown = await query.first(contextColumns)
    return row === undefined ? undefined : ContextRow.parse(row)
  }
  const joined = {
    pieceId: () => db('pieces').join('sites', 'sites.id', 'pieces.site_id'),
    cookerId: () => db('cookers').join('sites', 'sites.id', 'cookers.site_id'),
    deviceId: () => db('devices').join('sites', 'sites.id', 'devices.site_id'),
    channelId: () =>
      db('channels')
        .join('devices', 'devices.id', 'channels.device_id')
        .join('sites', 'sites.id', 'devices.site_id'),
  } satisfies Record<SiteThing, () => Knex.QueryBuilder>
  const idColumns = {
    pieceId: 'pieces.id',
    cookerId: 'cookers.id',
    deviceId: 'devices.id',
    channelId: 'channels.id',
  } satisfies Record<SiteThing, string>

  return {
    bySlug: (slug: string) => context(db('sites').where({ slug })),
    ofThing: (thing: SiteThing, id: number) => context(joined[thing]().where(idColumns[thing], id)),

    async byIds(ids: readonly number[]): Promise<Site[]> {
      const rows: unknown = await db('sites')
        .select({ ...contextColumns, elevationM: 'elevation_m' })
        .whereIn('id', [...ids])
        .orderBy('id')
      return z.array(SiteRow).parse(rows)
    },

    /** The site that was there first gives a house its name. */
    async firstName(): Promise<string | undefined> {
      const row: unknown = await db('sites').first('name').orderBy('id')
      return row === undefined ? undefined : z.object({ name: z.string() }).parse(row).name
    },
  }
}
