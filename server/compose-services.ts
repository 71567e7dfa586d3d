import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Clock } from '#shared/domain/clock.ts'
import { createCookerService } from './features/cookers/service.ts'
import { createDeviceBook } from './features/devices/device-book.ts'
import { createDeviceConnections } from './features/devices/device-connections.ts'
import { createDeviceStates } from './features/devices/device-states.ts'
import { createDeviceService } from './features/devices/service.ts'
import { createEventsService } from './features/events/service.ts'
import { createForecastsService } from './features/forecasts/service.ts'
import { createJobsService } from './features/jobs/service.ts'
import { createPiecesService } from './features/pieces/service.ts'
import { createReadingService } from './features/readings/service.ts'
import { createRecipesService } from './features/recipes/service.ts'
import { createServicesService } from './features/services/service.ts'
import { createSessionService } from './features/session/service.ts'
import { createSiteService } from './features/sites/service.ts'
import { createTonightReadModel } from './features/tonight/read-model.ts'
import { createIngest } from './ingest/ingest.ts'
import { createLiveBus } from './live/bus.ts'
import { createTickets } from './live/tickets.ts'

export interface ServiceDeps {
  /** Migrated. */
  db: Knex
  /** A pool of the ingest's own, so that no page can take its connections. */
  ingestDb: Knex
  log: Logger
  clock: Clock
  /** Signs access tokens. */
  tokenKey: string
  /** bcrypt's cost; the usual one when left out. */
  passwordCost?: number | undefined
  /** Called when too many readings wait for the database, and again when there is room. */
  onPressure: (on: boolean) => void
  /** The same for large packs alone. */
  onLargePressure: (on: boolean) => void
}

export type Services = ReturnType<typeof composeServices>

/** Makes every feature's service and gives each the others that it needs. Nothing listens and no job runs yet. */
export function composeServices({
  db,
  ingestDb,
  log,
  clock,
  tokenKey,
  passwordCost,
  onPressure,
  onLargePressure,
}: ServiceDeps) {
  const bus = createLiveBus()
  const { publish } = bus
  const common = { db, clock, publish }

  const tickets = createTickets({ clock })
  const sessions = createSessionService({ db, clock, tokenKey, passwordCost })
  const sites = createSiteService({ db })

  const deviceBook = createDeviceBook({ db, clock })
  const deviceStates = createDeviceStates({ db, publish, log })
  // A piece or a cooker that changed may have got a probe, or have lost it to another.
  bus.subscribe((site, { pieces, cookers }) => {
    if (pieces?.length || cookers?.length) void deviceStates.tellPlaces(site)
  })
  const deviceConnections = createDeviceConnections({ db, clock, log })
  const devices = createDeviceService({ ...common, book: deviceBook, connections: deviceConnections })
  const ingest = createIngest({
    db: ingestDb,
    clock,
    channels: deviceBook,
    live: bus,
    onHeard: (deviceId, { atMs, ...heard }) => deviceStates.note(deviceId, { lastSeenAtMs: atMs, ...heard }),
    onPressure,
    onLargePressure,
    log,
  })
  const byHttp = { ...ingest, accept: deviceConnections.counting(ingest.accept, 'http') }
  const readings = createReadingService({ db, clock, sensorsOf: devices.sensorsOf, ingest: byHttp })

  const cookers = createCookerService(common)
  const recipes = createRecipesService({ db })
  const forecasts = createForecastsService({ db, readings })
  const jobs = createJobsService({ db, clock, toForecast: forecasts.cooks.toForecast })
  const pieces = createPiecesService({ ...common, recipes, latestForecasts: forecasts.latestOf })
  const events = createEventsService({ ...common, pieces, cookers })
  const services = createServicesService(common)
  const tonight = createTonightReadModel({
    db,
    clock,
    pieces,
    services,
    cookers,
    devices,
    readings,
    forecasts,
  })

  return {
    ...{
      bus,
      tickets,
      sessions,
      sites,
      deviceBook,
      deviceStates,
      deviceConnections,
      devices,
      ingest,
      readings,
    },
    ...{ cookers, recipes, forecasts, jobs, pieces, events, services, tonight },
  }
}
