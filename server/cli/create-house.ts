import type { Knex } from 'knex'
import { IANAZone } from 'luxon'
import { z } from 'zod'
import { Slug } from '#shared/contract/common.ts'
import { recordAudit } from '../features/audit/service.ts'

/** What a house begins with: a site, and its owner, who may do everything there. */
export const HouseToCreate = z.object({
  name: z.string().trim().min(1, 'Give the site its name.').max(80),
  site: Slug,
  timeZone: z
    .string()
    .refine((zone) => IANAZone.isValidZone(zone), 'Name a zone of the IANA list, such as America/Chicago.'),
  elevationM: z.coerce.number().min(-430).max(5000).default(0),
  ownerEmail: z.email('Write the address like name@example.com.').max(254),
  ownerName: z.string().trim().min(1).max(80).default('Owner'),
})
export type HouseToCreate = z.infer<typeof HouseToCreate>

/** The database has a house in it already. */
export class HouseExists extends Error {}

/**
 * Puts the first site, its owner and a few recipes into an empty database.
 * @param now milliseconds since 1970 UTC
 * @throws HouseExists when there is a site or a person already; nothing is changed then
 */
export async function createHouse(
  db: Knex,
  house: HouseToCreate,
  { passwordHash, now }: { passwordHash: string; now: number },
): Promise<void> {
  await db.transaction(async (trx) => {
    // Of two at once, the second sees what the first has made.
    await trx.raw('lock table sites, users in share row exclusive mode')
    const { rows }: { rows: unknown } = await trx.raw(
      'select exists (select from sites) or exists (select from users) as taken',
    )
    const [{ taken }] = z.tuple([z.object({ taken: z.boolean() })]).parse(rows)
    if (taken)
      throw new HouseExists('This house has sites or people already. Its owner adds more from the pages.')

    const siteId = await insert(trx, 'sites', {
      slug: house.site,
      name: house.name,
      time_zone: house.timeZone,
      elevation_m: house.elevationM,
    })
    const userId = await insert(trx, 'users', {
      email: house.ownerEmail,
      name: house.ownerName,
      password_hash: passwordHash,
      created_at: new Date(now),
    })
    await trx('site_roles').insert({ user_id: userId, site_id: siteId, role: 'owner' })
    await trx('recipes').insert(firstRecipes).onConflict('slug').ignore()
    await recordAudit(trx, { at: now, siteId, action: 'house.create', subject: `site ${siteId}` })
  })
}

/** Common practice of the trade: 250 °F, paper at 165 °F, off at 203 °F. */
const usual = { cured: false, pit_set_c: 121.1, wrap_at_c: 73.9, wrap_method: 'paper', pull_at_c: 95 }
const firstRecipes = [
  { ...usual, slug: 'brisket', name: 'Brisket', typical_kg: 6 },
  { ...usual, slug: 'pastrami', name: 'Pastrami', cured: true, typical_kg: 5 },
  { ...usual, slug: 'short-rib', name: 'Short Rib', wrap_method: 'none', typical_kg: 2.5 },
]

async function insert(trx: Knex, table: string, row: Record<string, unknown>): Promise<number> {
  const inserted: unknown = await trx(table).insert(row).returning('id')
  const [{ id }] = z.tuple([z.object({ id: z.int() })]).parse(inserted)
  return id
}
