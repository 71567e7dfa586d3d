import type { Knex } from 'knex'
import { z } from 'zod'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import { StoredHouse } from './stored-house.ts'

/** What finished cooks taught, kept so that a restart does not have to learn it again. */
export interface KeptHouse {
  /** Newer ones have higher numbers. */
  id: number
  /** How many finished pieces there were then. */
  pieces: number
  house: HouseModel
}

/** The newest model that this version can use; undefined when there is none. */
export async function newestHouse(db: Knex): Promise<KeptHouse | undefined> {
  const row: unknown = await db('house_models').orderBy('id', 'desc').first('id', 'cooks', 'model')
  const found = z.object({ id: z.number(), cooks: z.number(), model: StoredHouse }).safeParse(row)
  return found.success ? { id: found.data.id, pieces: found.data.cooks, house: found.data.model } : undefined
}

/** The newest model's number, usable or not; 0 when there is none. */
export async function newestHouseId(db: Knex): Promise<number> {
  const row: unknown = await db('house_models').max({ id: 'id' }).first()
  return z.object({ id: z.number().nullable() }).parse(row).id ?? 0
}

/** Keeps a model; of older ones the last ten stay. @returns its number */
export async function keepHouse(
  db: Knex,
  { pieces, house }: Omit<KeptHouse, 'id'>,
  madeAt: number,
): Promise<number> {
  return db.transaction(async (trx) => {
    const made: unknown = await trx('house_models')
      .insert({ made_at: new Date(madeAt), cooks: pieces, model: JSON.stringify(house) })
      .returning('id')
    await trx.raw('delete from house_models where id <= (select max(id) - 10 from house_models)')
    return z.tuple([z.object({ id: z.number() })]).parse(made)[0].id
  })
}
