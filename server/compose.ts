import { createServer } from 'node:http'
import type { Logger } from 'pino'
import { createBroker, type Broker } from '../broker/broker.ts'
import { createMqttSockets } from '../broker/websocket.ts'
import type { House } from '#shared/contract/session.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { livePath } from '#shared/contract/live.ts'
import { mqttPath } from '#shared/contract/mqtt.ts'
import { may } from '#shared/domain/permissions.ts'
import { createApp } from './app.ts'
import { composeServices } from './compose-services.ts'
import { openDatabase } from './db/database.ts'
import { ensurePartitions, livePartitionSpan } from './db/partitions.ts'
import { watchSecrets } from './features/devices/secret-watch.ts'
import { createHealthService } from './features/health/service.ts'
import { usualSignInLimit, type SignInLimit } from './features/session/sign-in-limit.ts'
import { healthSources } from './health-sources.ts'
import { createGuard } from './http/guard.ts'
import { clientAddress, dispatchUpgrades } from './http/upgrades.ts'
import type { Person } from './http/mount.ts'
import { startJobs, type Jobs, type JobsDeps } from './jobs/start-jobs.ts'
import { asPortTaken, closeHttp, listen } from './listen.ts'
import { createLiveHub } from './live/hub.ts'
import { mountFeatures } from './routes.ts'

/** What a server is made of. */
export interface ServerDeps {
  /** A database with the newest schema. */
  databaseUrl: string
  log: Logger
  clock: Clock
  /** Signs access tokens. */
  tokenKey: string
  /** What was built: a short hash or a version. */
  build: string
  /** Where the pages and the API are served; port 0 takes a free one. */
  http: { host: string; port: number }
  /** Where devices connect; without it there is no broker. */
  mqtt?: { host: string; port: number } | undefined
  /** What runs without a request; without it this process leaves that to others. */
  jobs?: Pick<JobsDeps, 'retentionMonths' | 'byTheClock' | 'sweep' | 'makePool'> | undefined
  /** The house's name and accounts, when this is the demo house. */
  demo?: (NonNullable<House['demo']> & { name: string }) | undefined
  /** Where people reach this server, when that is known. */
  publicUrl?: string | undefined
  /** Where the built client is; without it only the API is served. */
  clientDir?: string | undefined
  /** How many reverse proxies stand before this server. */
  trustProxy?: number | undefined
  /** Compare every answer with the contract: not in production. */
  checkAnswers?: boolean | undefined
  signInLimit?: SignInLimit | undefined
  /** bcrypt's cost; the usual one when left out. */
  passwordCost?: number | undefined
}

/** Where a server that has started listens. */
export interface Listening {
  httpPort: number
  mqttPort: number | undefined
}

export type ComposedServer = ReturnType<typeof composeServer>

/** How long requests under way may take to end when the server stops, in milliseconds. */
const farewellMs = 5000

/**
 * Wires all parts of a server to each other. Nothing listens and no connection is open before `start`; `stop` ends
 * everything in reverse, so that what was taken is stored, and may be called at any time.
 */
export function composeServer(deps: ServerDeps) {
  const { databaseUrl, log, clock, tokenKey, passwordCost, build } = deps
  const db = openDatabase(databaseUrl)
  const ingestDb = openDatabase(databaseUrl, { max: 2 })
  let broker: Broker | undefined
  let jobs: Jobs | undefined
  let stopSecretWatch: (() => void) | undefined

  const services = composeServices({
    ...{ db, ingestDb, log, clock, tokenKey, passwordCost },
    onPressure: (on) => {
      log.warn(on ? 'Devices have to wait for the database' : 'Devices may send again')
      broker?.press(on)
    },
    onLargePressure: (on) => broker?.press(on, 'large'),
  })
  const health = createHealthService({
    ...{ db, clock, build },
    sources: healthSources({
      broker: () => broker,
      ingest: services.ingest,
      live: () => hub,
      jobs: services.jobs,
      runsJobs: deps.jobs !== undefined,
    }),
  })
  const app = createApp({
    log,
    build,
    guard: createGuard({
      personOf: services.sessions.personOf,
      signInDevice: services.devices.signIn,
      siteOf: services.sites.siteOf,
    }),
    features: (mount, router) =>
      mountFeatures(mount, router, {
        services,
        health,
        house,
        signInLimit: deps.signInLimit ?? usualSignInLimit,
        secure: deps.publicUrl?.startsWith('https:') ?? false,
      }),
    publicUrl: deps.publicUrl,
    clientDir: deps.clientDir,
    trustProxy: deps.trustProxy,
    checkAnswers: deps.checkAnswers,
  })
  const httpServer = createServer(app)
  const hub = createLiveHub({
    bus: services.bus,
    verifyTicket: services.tickets.redeem,
    snapshotOf: (site) => services.tonight.ofSite(site),
    mayView,
    clock,
    log,
  })

  const mqttSockets = createMqttSockets({
    onStream: (stream, request) => {
      if (!broker) stream.destroy()
      else {
        const remoteAddress = clientAddress(request, deps.trustProxy ?? 0)
        broker.handle(stream, { transport: 'websocket', remoteAddress })
      }
    },
  })
  const stopUpgrades = dispatchUpgrades(httpServer, {
    handlers: new Map([
      [livePath, hub.upgrade],
      ...(deps.mqtt ? ([[mqttPath, mqttSockets.upgrade]] as const) : []),
    ]),
    allowedOrigins: deps.publicUrl === undefined ? [] : [new URL(deps.publicUrl).origin],
  })

  /** Asked anew each time: a socket stays open for weeks, a role may not. */
  async function mayView({ userId }: Person, siteSlug: string): Promise<boolean> {
    const [person, site] = await Promise.all([
      services.sessions.person(userId),
      services.sites.siteOf('site', siteSlug),
    ])
    return site !== undefined && may(person?.rolesBySite.get(site.id) ?? [], 'site.view')
  }

  async function house(): Promise<House> {
    if (!deps.demo) return { name: (await services.sites.firstName()) ?? 'Coalhand', build, demo: null }
    const { name, ...demo } = deps.demo
    return { name, build, demo }
  }

  /** Takes traffic only once the pools are open and what devices need is in memory. */
  async function start(): Promise<Listening> {
    try {
      const { fromMs, toMs } = livePartitionSpan(clock.now())
      await ensurePartitions(db, fromMs, toMs)
      await services.devices.markAllOffline()
      await services.deviceBook.warm()
      await ingestDb.raw('select 1')
      broker = deps.mqtt && (await startBroker(deps.mqtt))
      if (broker) {
        services.deviceConnections.attach(broker)
        const { deviceBook: book, deviceConnections: connections } = services
        stopSecretWatch = watchSecrets({ db, clock, log, book, connections })
      }
      const { forecasts, bus } = services
      jobs =
        deps.jobs && startJobs({ db, databaseUrl, clock, log, forecasts, publish: bus.publish, ...deps.jobs })
      const httpPort = await listen(httpServer, deps.http)
      return { httpPort, mqttPort: broker?.port }
    } catch (error) {
      await stop()
      throw error
    }
  }

  function startBroker({ host, port }: { host: string; port: number }): Promise<Broker> {
    const { devices, ingest, deviceStates, deviceConnections } = services
    return createBroker({
      host,
      port,
      signIn: devices.signIn,
      accept: deviceConnections.counting(ingest.accept),
      onRefused: (refusal) => {
        deviceConnections.trouble(refusal.device.deviceId, { ...refusal, kind: refusal.reason })
        ingest.refuse(refusal).catch((error: unknown) => {
          log.warn(
            { err: error, reason: refusal.reason },
            'What a device sent was refused, and that is not on record',
          )
        })
      },
      onStatus: ({ deviceId }, connection, newest) => {
        deviceStates.note(deviceId, { connection })
        deviceConnections.changed(deviceId, connection === 'online', newest)
      },
      onTrouble: ({ device, ...trouble }) => deviceConnections.trouble(device.deviceId, trouble),
      log,
    }).catch((error: unknown) => {
      throw error instanceof Error ? asPortTaken(error, port, 'devices (MQTT)', 'MQTT_PORT') : error
    })
  }

  let stopping: Promise<void> | undefined

  async function stopAll(): Promise<void> {
    stopSecretWatch?.()
    stopUpgrades()
    // Requests first: one of them may bring readings, which the ingest then still takes.
    await Promise.all([closeHttp(httpServer, farewellMs), hub.stop(), broker?.stop()])
    await services.ingest.stop()
    await jobs?.stop()
    await services.deviceStates.stop()
    await services.deviceConnections.stop()
    await ingestDb.destroy()
    await db.destroy()
  }

  function stop(): Promise<void> {
    return (stopping ??= stopAll())
  }

  return { app, db, services, start, stop }
}
