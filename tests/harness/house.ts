import { createHash } from 'node:crypto'
import { hash } from 'bcryptjs'
import type { Knex } from 'knex'
import { z } from 'zod'
import { roles, type Role } from '#shared/domain/permissions.ts'

/** The password of everyone in a test's house. */
export const housePassword = 'oak-and-hickory-9'

export interface HousePerson {
  id: number
  email: string
  name: string
}
export interface HouseCooker {
  id: number
  name: string
}
export interface HouseDevice {
  id: number
  slug: string
  username: string
  secret: string
  /** By number, from 1. */
  channelIds: number[]
}
export interface HouseSite {
  id: number
  slug: string
  cookers: HouseCooker[]
  device: HouseDevice
}
export interface House {
  /** The site where everyone of `people` has the role that they are listed under. */
  own: HouseSite
  /** A site where only the stranger is somebody. */
  foreign: HouseSite
  people: Record<Role, HousePerson>
  /** Owner of the foreign site, nobody at the other. */
  stranger: HousePerson
  recipes: { id: number; slug: string; cured: boolean }[]
}

/**
 * Fills an empty database with a small house: two sites with cookers and a device each, a person for every role, and
 * recipes. Nothing is cooking yet.
 */
export async function makeHouse(db: Knex): Promise<House> {
  const passwordHash = await hash(housePassword, 4)
  const own = await makeSite(db, { slug: 'quarry-road', name: 'Quarry Road', timeZone: 'America/Chicago' })
  const foreign = await makeSite(db, { slug: 'mill-yard', name: 'Mill Yard', timeZone: 'America/Denver' })
  const people = await Promise.all(roles.map((role) => makePerson(db, passwordHash, own.id, role, role)))
  const person = Object.fromEntries(roles.map((role, index) => [role, people[index]]))
  return {
    own,
    foreign,
    people: People.parse(person),
    stranger: await makePerson(db, passwordHash, foreign.id, 'owner', 'stranger'),
    recipes: await makeRecipes(db),
  }
}

/** Adds a piece that nobody has put on yet. @returns its number */
export function makePiece(db: Knex, house: House, site: HouseSite, label = 'N1'): Promise<number> {
  return insert(db, 'pieces', {
    site_id: site.id,
    label,
    recipe_id: house.recipes[0]?.id,
    cured: false,
    raw_kg: 6,
    wrap_at_c: 74,
    wrap_method: 'paper',
    pull_at_c: 95,
    created_at: longAgo,
  })
}

/** Adds a person who has a role at a site. */
async function makePerson(
  db: Knex,
  passwordHash: string,
  siteId: number,
  role: Role,
  name: string,
): Promise<HousePerson> {
  const email = `${name}@quarryroad.example`
  const id = await insert(db, 'users', {
    email,
    name: `A ${name}`,
    password_hash: passwordHash,
    created_at: longAgo,
  })
  await db('site_roles').insert({ user_id: id, site_id: siteId, role })
  return { id, email, name: `A ${name}` }
}

async function makeSite(
  db: Knex,
  site: { slug: string; name: string; timeZone: string },
): Promise<HouseSite> {
  const { slug, name } = site
  const id = await insert(db, 'sites', { slug, name, time_zone: site.timeZone, elevation_m: 210 })
  return {
    id,
    slug,
    cookers: [
      await makeCooker(db, id, { name: 'North Offset', kind: 'offset', position: 1, pitSetC: 121 }),
      await makeCooker(db, id, { name: 'Cabinet One', kind: 'cabinet', position: 2, pitSetC: 107 }),
      await makeCooker(db, id, { name: 'Holding Cabinet', kind: 'holding', position: 3, pitSetC: 65 }),
    ],
    device: await makeDevice(db, id, slug),
  }
}

async function makeCooker(
  db: Knex,
  siteId: number,
  cooker: { name: string; kind: string; position: number; pitSetC: number },
): Promise<HouseCooker> {
  const id = await insert(db, 'cookers', {
    site_id: siteId,
    name: cooker.name,
    kind: cooker.kind,
    capacity: 4,
    position: cooker.position,
    pit_set_c: cooker.pitSetC,
    band_low_c: cooker.pitSetC - 8,
    band_high_c: cooker.pitSetC + 8,
  })
  return { id, name: cooker.name }
}

/** A box with six channels, a digital sensor on each. */
async function makeDevice(db: Knex, siteId: number, siteSlug: string): Promise<HouseDevice> {
  const slug = 'north-box'
  const username = `${siteSlug}.${slug}`
  const secret = `secret-of-${siteSlug}`
  const id = await insert(db, 'devices', {
    site_id: siteId,
    slug,
    name: 'North box',
    username,
    created_at: longAgo,
  })
  await db('device_secrets').insert({
    device_id: id,
    secret_hash: createHash('sha256').update(secret).digest(),
    created_at: longAgo,
  })
  const channelIds: number[] = []
  for (const number of [1, 2, 3, 4, 5, 6]) {
    const channelId = await insert(db, 'channels', { device_id: id, number })
    await db('sensors').insert({ channel_id: channelId, kind: 'digital', during: `[${longAgo},)` })
    channelIds.push(channelId)
  }
  return { id, slug, username, secret, channelIds }
}

async function makeRecipes(db: Knex) {
  const usual = { pit_set_c: 121.1, wrap_at_c: 74, wrap_method: 'paper', pull_at_c: 95 }
  const recipes = [
    { slug: 'house-brisket', name: 'House Brisket', cured: false, ...usual, typical_kg: 6.2 },
    {
      slug: 'peppered-pastrami',
      name: 'Peppered Pastrami',
      cured: true,
      ...usual,
      pull_at_c: 92,
      typical_kg: 5.1,
    },
  ]
  const made: House['recipes'] = []
  for (const recipe of recipes) made.push({ id: await insert(db, 'recipes', recipe), ...recipe })
  return made
}

const longAgo = '2020-01-01T00:00:00Z'
const Inserted = z.tuple([z.object({ id: z.int() })])
const PersonMade = z.object({ id: z.int(), email: z.string(), name: z.string() })
const People = z.record(z.enum(roles), PersonMade)

async function insert(db: Knex, table: string, row: Record<string, unknown>): Promise<number> {
  const [{ id }] = Inserted.parse(await db(table).insert(row).returning('id'))
  return id
}
