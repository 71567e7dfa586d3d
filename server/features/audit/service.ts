import type { Knex } from 'knex'

/** Who did what, where and to what. */
export interface AuditEntry {
  /** Milliseconds since 1970 UTC. */
  at: number
  /** Nobody: the system itself. */
  userId?: number | undefined
  siteId?: number | undefined
  /** Noun and verb, such as `cooker.change`. */
  action: string
  /** What it was done to, such as `cooker 4`. */
  subject: string
  /** What it was before and after, or whatever else someone will ask later. Never a secret. */
  data?: Record<string, unknown>
}

/** Writes an entry of the trail, in the transaction of the change that it tells of. */
export async function recordAudit(trx: Knex, entry: AuditEntry): Promise<void> {
  await trx('audit_entries').insert({
    at: new Date(entry.at),
    user_id: entry.userId ?? null,
    site_id: entry.siteId ?? null,
    action: entry.action,
    subject: entry.subject,
    data: JSON.stringify(entry.data ?? {}),
  })
}
