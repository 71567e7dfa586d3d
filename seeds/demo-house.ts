import type { Knex } from 'knex'
import { z } from 'zod'
import {
  demoPeople,
  demoRecipes,
  demoSites,
  type DemoCooker,
  type DemoDevice,
  type DemoSite,
} from '../simulators/demo/house.ts'

/** What the demo house is filled with beside what `simulators/demo/house.ts` says. */
export interface DemoHouseSeed {
  /** When it was set up, ms since 1970 UTC: before its first cook. */
  since: number
  /** bcrypt's hash of the demo accounts' password. */
  passwordHash: string
  /** SHA-256 of the secret of a device, by its user name. */
  secretHash: (username: string) => Buffer
}

/** The numbers of what was put in, by the names that the demo goes by. */
export interface DemoHouseIds {
  sites: Map<string, number>
  /** By e-mail address. */
  users: Map<string, number>
  /** By `site/cooker`. */
  cookers: Map<string, number>
  /** By `site/device/number`. */
  channels: Map<string, number>
  recipes: Map<string, number>
}

/**
 * Puts the sites, people, cookers, devices and recipes of the invented house into a database. What is there already
 * stays as it is, so it may be run again; run it in a transaction.
 */
export async function seedDemoHouse(db: Knex, seed: DemoHouseSeed): Promise<DemoHouseIds> {
  const ids: DemoHouseIds = {
    sites: new Map(),
    users: new Map(),
    cookers: new Map(),
    channels: new Map(),
    recipes: new Map(),
  }
  for (const recipe of demoRecipes) {
    ids.recipes.set(
      recipe.slug,
      await ensure(
        db,
        'recipes',
        { slug: recipe.slug },
        {
          name: recipe.name,
          cured: recipe.cured,
          pit_set_c: recipe.pitSetC,
          wrap_at_c: recipe.wrapAtC,
          wrap_method: recipe.wrapMethod,
          pull_at_c: recipe.pullAtC,
          typical_kg: recipe.typicalKg,
        },
      ),
    )
  }
  for (const site of demoSites) ids.sites.set(site.slug, await seedSite(db, site, seed, ids))
  for (const person of demoPeople) {
    const userId = await ensure(
      db,
      'users',
      { email: person.email },
      {
        name: person.name,
        password_hash: seed.passwordHash,
        created_at: new Date(seed.since),
      },
    )
    ids.users.set(person.email, userId)
    for (const [slug, roles] of Object.entries(person.roles)) {
      const rows = roles.map((role) => ({ user_id: userId, site_id: ids.sites.get(slug), role }))
      await db('site_roles').insert(rows).onConflict().ignore()
    }
  }
  return ids
}

/** What a demo device signs in as. */
export function demoUsername(site: Pick<DemoSite, 'slug'>, device: Pick<DemoDevice, 'slug'>): string {
  return `${site.slug}.${device.slug}`
}

async function seedSite(db: Knex, site: DemoSite, seed: DemoHouseSeed, ids: DemoHouseIds): Promise<number> {
  const siteId = await ensure(
    db,
    'sites',
    { slug: site.slug },
    {
      name: site.name,
      time_zone: site.timeZone,
      elevation_m: site.elevationM,
    },
  )
  for (const cooker of site.cookers) {
    ids.cookers.set(`${site.slug}/${cooker.name}`, await seedCooker(db, siteId, cooker))
  }
  for (const device of site.devices) await seedDevice(db, site, siteId, device, seed, ids)
  return siteId
}

function seedCooker(db: Knex, siteId: number, cooker: DemoCooker): Promise<number> {
  return ensure(
    db,
    'cookers',
    { site_id: siteId, name: cooker.name },
    {
      kind: cooker.kind,
      capacity: cooker.capacity,
      position: cooker.position,
      pit_set_c: cooker.pitSetC,
      band_low_c: cooker.bandLowC,
      band_high_c: cooker.bandHighC,
    },
  )
}

async function seedDevice(
  db: Knex,
  site: DemoSite,
  siteId: number,
  device: DemoDevice,
  seed: DemoHouseSeed,
  ids: DemoHouseIds,
): Promise<void> {
  const username = demoUsername(site, device)
  const since = new Date(seed.since).toISOString()
  const deviceId = await ensure(
    db,
    'devices',
    { site_id: siteId, slug: device.slug },
    {
      name: device.name,
      username,
      interval_s: device.intervalS,
      created_at: since,
    },
  )
  await ensure(
    db,
    'device_secrets',
    { device_id: deviceId, secret_hash: seed.secretHash(username) },
    {
      created_at: since,
    },
  )
  for (const channel of device.channels) {
    const channelId = await ensure(db, 'channels', { device_id: deviceId, number: channel.number }, {})
    ids.channels.set(`${site.slug}/${device.slug}/${channel.number}`, channelId)
    await ensure(db, 'sensors', { channel_id: channelId }, { kind: 'digital', during: '[-infinity,)' })
    if (channel.role !== 'pit') continue
    const cookerId = ids.cookers.get(`${site.slug}/${channel.cooker}`)
    await ensure(
      db,
      'probe_placements',
      { channel_id: channelId, role: 'pit' },
      {
        cooker_id: cookerId,
        during: `[${since},)`,
      },
    )
  }
}

const Found = z.object({ id: z.number() })

/** The number of the row that a key names; made with the rest if it is not there. */
async function ensure(
  db: Knex,
  table: string,
  key: Record<string, unknown>,
  rest: Record<string, unknown>,
): Promise<number> {
  const found: unknown = await db(table).where(key).first('id')
  if (found !== undefined) return Found.parse(found).id
  const made: unknown = await db(table)
    .insert({ ...key, ...rest })
    .returning('id')
  return z.tuple([Found]).parse(made)[0].id
}
