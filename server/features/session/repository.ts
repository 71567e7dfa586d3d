import type { Knex } from 'knex'
import { z } from 'zod'
import {
  Locale,
  Role,
  Theme,
  UnitSystem,
  type User,
  type sessionEndpoints,
} from '#shared/contract/session.ts'
import type { Role as RoleName } from '#shared/domain/permissions.ts'

/** What a person may change about what they see. */
export type PreferencesChange = z.output<(typeof sessionEndpoints)['setPreferences']['body']>

const Credentials = z.object({ id: z.int(), passwordHash: z.string() })

const UserRow = z.object({
  id: z.int(),
  email: z.string(),
  name: z.string(),
  units: UnitSystem,
  theme: Theme,
  locale: Locale,
  sites: z.array(
    z.object({ slug: z.string(), name: z.string(), timeZone: z.string(), roles: z.array(Role) }),
  ),
})

const PersonRow = z.object({ name: z.string(), siteId: z.int().nullable(), roles: z.array(Role).nullable() })

const StoredToken = z.object({
  familyId: z.string(),
  userId: z.int(),
  expiresAt: z.date(),
  usedAt: z.date().nullable(),
  revokedAt: z.date().nullable(),
  disabledAt: z.date().nullable(),
})
export type StoredToken = z.infer<typeof StoredToken>

/** A refresh token to keep; times in milliseconds since 1970 UTC. */
export interface NewToken {
  hash: Buffer
  familyId: string
  userId: number
  createdAt: number
  expiresAt: number
}

/** People as they sign in, and their refresh tokens. */
export function sessionRepository(db: Knex) {
  return {
    /** Someone who may sign in, by e-mail in any case. */
    async credentialsOf(email: string) {
      const row: unknown = await db('users')
        .first('id', { passwordHash: 'password_hash' })
        .whereRaw('lower(email) = lower(?)', [email])
        .whereNull('disabled_at')
      return row === undefined ? undefined : Credentials.parse(row)
    },

    async user(id: number): Promise<User | undefined> {
      const row: unknown = await db('users')
        .first('id', 'email', 'name', 'units', 'theme', 'locale', { sites: sitesOfUser(db) })
        .where({ id })
        .whereNull('disabled_at')
      if (row === undefined) return undefined
      const { units, theme, locale, ...user } = UserRow.parse(row)
      return { ...user, preferences: { units, theme, locale } }
    },

    /** Name and roles by site; undefined when there is no such person or they may no longer sign in. */
    async person(id: number): Promise<{ name: string; rolesBySite: Map<number, RoleName[]> } | undefined> {
      const rows: unknown = await db('users')
        .leftJoin('site_roles', 'user_id', 'users.id')
        .where('users.id', id)
        .whereNull('disabled_at')
        .groupBy('users.id', 'site_id')
        .select(
          'users.name',
          { siteId: 'site_id' },
          { roles: db.raw('array_agg(role) filter (where role is not null)') },
        )
      const [first, ...others] = z.array(PersonRow).parse(rows)
      if (!first) return undefined
      const rolesBySite = new Map<number, RoleName[]>()
      for (const { siteId, roles } of [first, ...others]) {
        if (siteId !== null && roles !== null) rolesBySite.set(siteId, roles)
      }
      return { name: first.name, rolesBySite }
    },

    async setPreferences(id: number, preferences: PreferencesChange): Promise<void> {
      if (Object.keys(preferences).length > 0) await db('users').where({ id }).update(preferences)
    },

    /** Locked, so that two uses of one token are seen one after the other. Call within a transaction. */
    async lockToken(hash: Buffer): Promise<StoredToken | undefined> {
      const row: unknown = await db('refresh_tokens as token')
        .join('users', 'users.id', 'user_id')
        .first(
          { familyId: 'family_id', userId: 'user_id', expiresAt: 'expires_at' },
          { usedAt: 'used_at', revokedAt: 'revoked_at', disabledAt: 'disabled_at' },
        )
        .where('token_hash', hash)
        .forUpdate('token')
      return row === undefined ? undefined : StoredToken.parse(row)
    },

    async addToken(token: NewToken): Promise<void> {
      await db('refresh_tokens').insert({
        token_hash: token.hash,
        family_id: token.familyId,
        user_id: token.userId,
        created_at: new Date(token.createdAt),
        expires_at: new Date(token.expiresAt),
      })
    },

    async markUsed(hash: Buffer, at: number): Promise<void> {
      await db('refresh_tokens')
        .where('token_hash', hash)
        .update({ used_at: new Date(at) })
    },

    async revokeFamily(familyId: string, at: number): Promise<void> {
      await db('refresh_tokens')
        .where('family_id', familyId)
        .whereNull('revoked_at')
        .update({ revoked_at: new Date(at) })
    },

    async dropExpired(now: number): Promise<void> {
      await db('refresh_tokens').where('expires_at', '<', new Date(now)).delete()
    },
  }
}

/** The sites of the user in the surrounding query, as JSON in the order of their names. */
function sitesOfUser(db: Knex) {
  return db.raw(`coalesce((
    select jsonb_agg(jsonb_build_object(
        'slug', held.slug, 'name', held.name, 'timeZone', held.time_zone, 'roles', held.roles) order by held.id)
    from (
      select sites.id, slug, sites.name, time_zone, jsonb_agg(role order by role) as roles
      from site_roles join sites on sites.id = site_id
      where user_id = users.id
      group by sites.id
    ) held), '[]')`)
}
