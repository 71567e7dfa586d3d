import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Clock } from '#shared/domain/clock.ts'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import type { AssembledCook, CookSource } from '../features/forecasts/service.ts'
import type { ForecastPool } from './forecast-pool.ts'
import { keepHouse, newestHouse } from './house-models.ts'

export interface LearningDeps {
  db: Knex
  clock: Clock
  log: Logger
  cooks: Pick<CookSource, 'finished' | 'recordOf' | 'assemble'>
  pool: Pick<ForecastPool, 'learn' | 'useHouse'>
}

/** A house's habits change: older cooks than these many are left out. */
const mostCooks = 200

/** Lets the forecast learn from the house's finished cooks whenever there are others than last time. */
export function createLearning({ db, clock, log, cooks, pool }: LearningDeps) {
  let known: { pieces: number; house: HouseModel | null } | undefined

  /** Takes up what was learned before. */
  async function load(): Promise<NonNullable<typeof known>> {
    if (known) return known
    known = (await newestHouse(db)) ?? { pieces: 0, house: null }
    if (known.house) pool.useHouse(known.house)
    return known
  }

  return {
    /** What has been learned so far; null: nothing, the general model holds. */
    house: (): HouseModel | null => known?.house ?? null,

    /** Takes up what was learned before; to be awaited before the first forecast. */
    load: async (): Promise<void> => {
      await load()
    },

    /** Learns if there is something to learn. */
    learn: async (): Promise<void> => {
      const finished = await cooks.finished()
      if (finished.length === (await load()).pieces) return
      const lessons: AssembledCook[] = []
      for (const pieceId of finished.slice(-mostCooks)) {
        const record = await cooks.recordOf(pieceId)
        if (record?.pulledAt == null) continue
        lessons.push(await cooks.assemble(record, record.pulledAt))
      }
      const begun = clock.now()
      const house = await pool.learn(lessons)
      const learned = { pieces: finished.length, house }
      known = learned
      pool.useHouse(house)
      await keepHouse(db, learned, clock.now())
      log.info({ cooks: house.cooks, ms: clock.now() - begun }, 'The forecast learned from finished cooks')
    },
  }
}
