import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Clock } from '#shared/domain/clock.ts'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import type { AssembledCook, CookSource } from '../features/forecasts/service.ts'
import type { ForecastPool } from './forecast-pool.ts'
import { keepHouse, newestHouse, newestHouseId } from './house-models.ts'

export interface LearningDeps {
  db: Knex
  clock: Clock
  log: Logger
  cooks: Pick<CookSource, 'finished' | 'recordOf' | 'assemble'>
  pool: Pick<ForecastPool, 'learn' | 'useHouse'>
}

/** A house's habits change: older cooks than these many are left out. */
const mostCooks = 200

/** How old the knowledge of what others learned may be, ms. */
const freshForMs = 50_000

/**
 * Lets the forecast learn from the house's finished cooks whenever there are others than last time, in whatever
 * process: what one learned the others take up.
 */
export function createLearning({ db, clock, log, cooks, pool }: LearningDeps) {
  let known: { id: number; pieces: number; house: HouseModel | null } = { id: 0, pieces: 0, house: null }
  let lookedAt = Number.NEGATIVE_INFINITY
  let looking: Promise<void> | undefined

  /** Takes up what was learned before, here or elsewhere. */
  function load(): Promise<void> {
    if (clock.now() - lookedAt < freshForMs) return Promise.resolve()
    looking ??= look().finally(() => {
      looking = undefined
    })
    return looking
  }

  async function look(): Promise<void> {
    const id = await newestHouseId(db)
    if (id !== known.id) {
      const newest = await newestHouse(db)
      known = newest ? { ...newest, id } : { ...known, id }
      if (newest) pool.useHouse(newest.house)
    }
    lookedAt = clock.now()
  }

  return {
    /** What has been learned so far; null: nothing, the general model holds. */
    house: (): HouseModel | null => known.house,

    /** Takes up what was learned before; to be awaited before a forecast. */
    load,

    /** Learns if there is something to learn. */
    learn: async (): Promise<void> => {
      await look()
      const finished = await cooks.finished()
      if (finished.length === known.pieces) return
      const lessons: AssembledCook[] = []
      for (const pieceId of finished.slice(-mostCooks)) {
        const record = await cooks.recordOf(pieceId)
        if (record?.pulledAt == null) continue
        lessons.push(await cooks.assemble(record, record.pulledAt))
      }
      const begun = clock.now()
      const house = await pool.learn(lessons)
      const id = await keepHouse(db, { pieces: finished.length, house }, clock.now())
      known = { id, pieces: finished.length, house }
      pool.useHouse(house)
      log.info({ cooks: house.cooks, ms: clock.now() - begun }, 'The forecast learned from finished cooks')
    },
  }
}
