import type { Knex } from 'knex'
import { z } from 'zod'
import type { Service } from '#shared/contract/site.ts'

/** A service about to be stored; `servesAt` in ms since 1970 UTC. */
export interface ServiceToStore {
  siteId: number
  /** The business day, `YYYY-MM-DD`. */
  date: string
  servesAt: number
  portions: number
  note: string | null
}

export function servicesRepository(db: Knex) {
  return {
    /** @returns its number; undefined when the site has a service at that moment already */
    async add(service: ServiceToStore): Promise<number | undefined> {
      const rows: unknown = await db('services')
        .insert({
          site_id: service.siteId,
          date: service.date,
          serves_at: new Date(service.servesAt),
          portions: service.portions,
          note: service.note,
        })
        .onConflict(['site_id', 'serves_at'])
        .ignore()
        .returning('id')
      return z.array(z.object({ id: z.number() })).parse(rows)[0]?.id
    },

    find: async (id: number): Promise<Service | undefined> => (await select(db, 'v.id = ?', [id]))[0],

    /** Those of a span (ms since 1970 UTC), in time order. */
    between: (siteId: number, fromMs: number, toMs: number): Promise<Service[]> =>
      select(db, 'v.site_id = ? and v.serves_at between ? and ?', [
        siteId,
        new Date(fromMs).toISOString(),
        new Date(toMs).toISOString(),
      ]),
  }
}

const Rows = z.object({
  rows: z.array(
    z.object({
      id: z.number(),
      site: z.string(),
      date: z.string(),
      serves_at: z.date(),
      portions: z.number(),
      note: z.string().nullable(),
    }),
  ),
})

async function select(db: Knex, where: string, bindings: readonly (string | number)[]): Promise<Service[]> {
  const answer: unknown = await db.raw(
    `select v.id, s.slug as site, v.date, v.serves_at, v.portions, v.note
     from services v join sites s on s.id = v.site_id where ${where} order by v.serves_at`,
    bindings,
  )
  return Rows.parse(answer).rows.map(({ serves_at, ...row }) => ({
    ...row,
    servesAt: serves_at.toISOString(),
  }))
}
