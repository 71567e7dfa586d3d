import type { Knex } from 'knex'
import { z } from 'zod'
import { WrapMethodName } from '#shared/contract/event.ts'
import type { Recipe } from '#shared/contract/piece.ts'

export type RecipesService = ReturnType<typeof createRecipesService>

/** The house's recipes: shared by its sites. */
export function createRecipesService({ db }: { db: Knex }) {
  return {
    list: (): Promise<Recipe[]> => select(db),
    find: async (recipeId: number): Promise<Recipe | undefined> => (await select(db, recipeId))[0],
  }
}

const Rows = z.array(
  z.object({
    id: z.number(),
    slug: z.string(),
    name: z.string(),
    cured: z.boolean(),
    pit_set_c: z.number(),
    wrap_at_c: z.number(),
    wrap_method: WrapMethodName,
    pull_at_c: z.number(),
    typical_kg: z.number(),
  }),
)

async function select(db: Knex, recipeId?: number): Promise<Recipe[]> {
  const query = db('recipes').select('*').orderBy('id')
  const rows: unknown = await (recipeId === undefined ? query : query.where({ id: recipeId }))
  return Rows.parse(rows).map((row) => ({
    id: row.id,
    slug: row.slug,
    name: row.name,
    cured: row.cured,
    pitSetC: row.pit_set_c,
    wrapAtC: row.wrap_at_c,
    wrapMethod: row.wrap_method,
    pullAtC: row.pull_at_c,
    typicalKg: row.typical_kg,
  }))
}
