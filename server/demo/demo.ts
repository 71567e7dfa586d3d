import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { House } from '#shared/contract/session.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { demoHouseName, demoPeople } from '../../simulators/demo/house.ts'
import type { ForecastsService } from '../features/forecasts/service.ts'
import { backfillForecasts } from './backfill-forecasts.ts'
import { houseState, seedDemo, seededAt } from './seed-demo.ts'
import { startFleet } from './start-fleet.ts'

export interface DemoOptions {
  /** With the newest schema. */
  db: Knex
  clock: Clock
  log: Logger
  /** As asked for; unset: on when the database is new or holds the demo already, and this is not production. */
  wanted: 'on' | 'off' | undefined
  production: boolean
  /** The house's seed, when it is made now. */
  seed: number
  /** Of every demo account. */
  password: string
  /** From which the devices' secrets are made. */
  deviceKey: string
}

/** Where the running server is reached. */
export interface LiveAt {
  httpUrl: string
  mqttUrl: string
  forecasts: ForecastsService
}

export interface Demo {
  /** For the sign-in page. */
  house: NonNullable<House['demo']> & { name: string }
  /** Starts its devices and crew, and fills in what was forecast before. @returns stop */
  goLive: (at: LiveAt) => () => Promise<void>
}

/**
 * Makes the demo house when there is to be one, or finds it from an earlier start.
 * @returns undefined when this is not a demo
 */
export async function openDemo(options: DemoOptions): Promise<Demo | undefined> {
  const { db, clock, log, wanted, production, seed, password, deviceKey } = options
  if (wanted === 'off') return undefined
  const state = await houseState(db)
  if (state === 'own') {
    if (wanted === 'on') log.warn('DEMO is on, but this database holds a house of its own: it is left alone')
    return undefined
  }
  if (production && wanted !== 'on') return undefined
  const begun = clock.now()
  const isNew = await seedDemo({ db, clock, seed, password, deviceKey, log: (line) => log.info(line) })
  if (isNew) log.info({ ms: clock.now() - begun }, 'Demo house: it stands')
  const seeded = await seededAt(db)
  if (!seeded) throw new Error('The demo house is gone right after it was made.')

  return {
    house: { name: demoHouseName, password, accounts: accounts() },
    goLive({ httpUrl, mqttUrl, forecasts }) {
      const fleet = startFleet({ mqttUrl, httpUrl, seed: seeded.seed, password, deviceKey, log })
      const stopBackfill = backfillForecasts({ db, log, forecasts, before: seeded.at })
      return async () => {
        await Promise.all([fleet.stop(), stopBackfill()])
      }
    },
  }
}

function accounts(): NonNullable<House['demo']>['accounts'] {
  return demoPeople.flatMap(({ name, email, does, roles }) => {
    const [role] = roles['quarry-road']
    return role === undefined ? [] : [{ name, email, does, role }]
  })
}
