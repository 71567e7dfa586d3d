import type { Knex } from 'knex'
import { z } from 'zod'

/** What is kept of a secret. Times in milliseconds since 1970 UTC. */
export interface SecretFacts {
  id: number
  createdAtMs: number
  expiresAtMs: number | null
  firstUsedAtMs: number | null
  lastUsedAtMs: number | null
}

const Row = z.object({
  id: z.int(),
  created_at: z.date(),
  expires_at: z.date().nullable(),
  first_used_at: z.date().nullable(),
  last_used_at: z.date().nullable(),
})
const DeviceRow = z.object({ username: z.string(), site_id: z.int() })
const Ids = z.array(z.object({ id: z.int() }))

/** Secrets of devices; an ended one stays, so that whoever still gives it can be told so. */
export function secretRows(db: Knex) {
  /** Secrets that end after a time, or never. */
  const endingAfter = (ms: number) =>
    db('device_secrets').where((either) => {
      void either.whereNull('expires_at').orWhere('expires_at', '>', new Date(ms))
    })

  return {
    /** Those of a device that are good, the newest first. */
    async alive(deviceId: number, nowMs: number): Promise<SecretFacts[]> {
      const rows: unknown = await endingAfter(nowMs)
        .where('device_id', deviceId)
        .orderBy('id', 'desc')
        .select('id', 'created_at', 'expires_at', 'first_used_at', 'last_used_at')
      return z
        .array(Row)
        .parse(rows)
        .map((row) => ({
          id: row.id,
          createdAtMs: row.created_at.getTime(),
          expiresAtMs: row.expires_at?.getTime() ?? null,
          firstUsedAtMs: row.first_used_at?.getTime() ?? null,
          lastUsedAtMs: row.last_used_at?.getTime() ?? null,
        }))
    },

    /** Which of these secrets are good no more. */
    async endedOf(ids: readonly number[], nowMs: number): Promise<Set<number>> {
      const rows: unknown = await endingAfter(nowMs).whereIn('id', ids).select('id')
      const alive = new Set(Ids.parse(rows).map(({ id }) => id))
      return new Set(ids.filter((id) => !alive.has(id)))
    },

    /** A device's user name and site; others who would change its secrets wait until the transaction ends. */
    async hold(deviceId: number): Promise<{ username: string; siteId: number } | undefined> {
      const row: unknown = await db('devices')
        .where({ id: deviceId })
        .forUpdate()
        .first('username', 'site_id')
      const device = DeviceRow.optional().parse(row)
      return device && { username: device.username, siteId: device.site_id }
    },

    async add(deviceId: number, hash: Buffer, createdAtMs: number): Promise<number> {
      const added: unknown = await db('device_secrets')
        .insert({ device_id: deviceId, secret_hash: hash, created_at: new Date(createdAtMs) })
        .returning('id')
      return Ids.parse(added)[0]?.id ?? NaN
    },

    /** Ends secrets at a time, unless they end before it. */
    async end(ids: readonly number[], atMs: number): Promise<void> {
      await endingAfter(atMs)
        .whereIn('id', ids)
        .update({ expires_at: new Date(atMs) })
    },

    async saveUses(uses: readonly { id: number; firstMs: number; lastMs: number }[]): Promise<void> {
      if (uses.length === 0) return
      await db.raw(
        `update device_secrets s set first_used_at = coalesce(s.first_used_at, u.first_at),
           last_used_at = greatest(s.last_used_at, u.last_at)
         from unnest(?::int[], ?::timestamptz[], ?::timestamptz[]) as u (id, first_at, last_at)
         where s.id = u.id`,
        [
          uses.map(({ id }) => id),
          uses.map(({ firstMs }) => new Date(firstMs).toISOString()),
          uses.map(({ lastMs }) => new Date(lastMs).toISOString()),
        ],
      )
    },
  }
}
