import { z } from 'zod'
import type { HouseModel } from '#shared/forecast/house-model.ts'

/** As much of a stored model as tells whether this version of the program can use it. */
const Shape = z.looseObject({
  version: z.literal(1),
  cooks: z.number(),
  laws: z.looseObject({}),
  pits: z.looseObject({}),
  crew: z.looseObject({}),
  correction: z.looseObject({}),
})

/** A house's model as it comes out of the database or to a worker; one of another version is refused. */
export const StoredHouse = z.custom<HouseModel>((value) => Shape.safeParse(value).success)
