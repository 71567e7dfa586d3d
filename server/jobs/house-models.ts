import type { Knex } from 'knex'
import { z } from 'zod'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import { StoredHouse } from './stored-house.ts'

/** What finished cooks taught, kept so that a restart does not have to learn it again. */
export interface KeptHouse {
  /** How many finished pieces there were then. */
  pieces: number
  house: HouseModel
}

/** The newest model that this version can use; undefined when there is none. */
export async function newestHouse(db: Knex): Promise<KeptHouse | undefined> {
  const row: unknown = await db('house_models').orderBy('id', 'desc').first('cooks', 'model')
  const found = z.object({ cooks: z.number(), model: StoredHouse }).safeParse(row)
  return found.success ? { pieces: found.data.cooks, house: found.data.model } : undefined
}

/** Keeps a model; of older ones the last ten stay. */
export async function keepHouse(db: Knex, { pieces, house }: KeptHouse, madeAt: number): Promise<void> {
  await db.transaction(async (trx) => {
    await trx('house_models').insert({
      made_at: new Date(madeAt),
      cooks: pieces,
      model: JSON.stringify(house),
    })
    await trx.raw('delete from house_models where id <= (select max(id) - 10 from house_models)')
  })
}
