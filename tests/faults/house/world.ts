import { join } from 'node:path'
import type { Knex } from 'knex'
import { z } from 'zod'
import { sessionEndpoints } from '#shared/contract/session.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { openDatabase } from '../../../server/db/database.ts'
import { migrate } from '../../../server/db/migrate.ts'
import {
  freePort,
  launchServerProcess,
  type ServerProcess,
  type StartingServer,
} from '../../broker/server-process.ts'
import { housePassword, makeHouse } from '../../harness/house.ts'
import { startFleet, type Fleet } from '../devices/fleet.ts'
import type { BoxPlan } from '../devices/plan.ts'
import { runFolder } from '../../harness/run-folders.ts'
import { addDevices, type KnownDevice } from './devices.ts'
import { startOwnPostgres, type OwnPostgres } from './own-postgres.ts'

/** A house for one scenario: PostgreSQL of its own, the server in earnest, devices that may sign in. */
export interface World {
  postgres: OwnPostgres
  /** A way to the database besides the server's own. */
  db: Knex
  devices: KnownDevice[]
  mqttPort: number
  /** The one that runs, or ran last. */
  server: () => ServerProcess
  /** Starts a server after the last one was killed, without waiting for it. */
  launch: () => StartingServer
  /** The same, waiting until it listens. */
  restart: () => Promise<ServerProcess>
  /** Starts boxes; those still there at the end are stopped with the rest. */
  startFleet: (seed: string, plans: readonly BoxPlan[]) => Promise<Fleet>
  /** What the server has logged as a warning or worse, by its message. */
  complaints: () => ReadonlyMap<string, number>
  /** An access token of the lead hand. */
  signIn: () => Promise<string>
  close: () => Promise<void>
}

export const worldPrefix = 'coalhand-faults-'

/** The site of all devices. */
export const worldSite = 'quarry-road'

const open = new Set<World>()

/** Stops what still runs, when a run is broken off. */
export async function closeWorlds(): Promise<void> {
  for (const world of open) await world.close()
}

/** Runs a scenario in a house of its own, and clears that away whatever happens. */
export async function withWorld<T>(
  devices: number,
  settings: Record<string, string>,
  run: (world: World) => Promise<T>,
): Promise<T> {
  const world = await openWorld(devices, settings)
  open.add(world)
  try {
    return await run(world)
  } finally {
    open.delete(world)
    await world.close()
  }
}

/** @param settings PostgreSQL's parameters where they differ from Debian's */
async function openWorld(devices: number, settings: Record<string, string> = {}): Promise<World> {
  const folder = runFolder(worldPrefix)
  const started: (() => Promise<unknown> | undefined)[] = []
  const close = async () => {
    for (const end of started.splice(0).reverse()) await end()
  }
  try {
    return { ...(await furnish()), close }
  } catch (error) {
    await close()
    throw error
  }

  async function furnish(): Promise<Omit<World, 'close'>> {
    const postgres = await startOwnPostgres(folder, settings)
    started.push(postgres.destroy)
    const db = openDatabase(postgres.url, { max: 2 })
    started.push(() => db.destroy())
    await migrate(db)
    const house = await makeHouse(db)
    const known = await addDevices(db, house.own, devices)
    const mqttPort = await freePort()
    const complaints = new Map<string, number>()
    let starting: StartingServer | undefined
    let running: ServerProcess | undefined
    started.push(() => starting?.kill())

    const launch = () => {
      starting = launchServerProcess({
        databaseUrl: postgres.url,
        mqttPort,
        dataDir: join(folder, 'server'),
        onLine: (line) => {
          const complaint = complaintIn(line)
          if (complaint !== undefined) complaints.set(complaint, (complaints.get(complaint) ?? 0) + 1)
        },
      })
      return starting
    }
    const restart = async () => (running = await launch().listens)
    const server = () => {
      if (!running) throw new Error('The server was not started.')
      return running
    }
    await restart()
    return {
      ...{ postgres, db, devices: known, mqttPort, server, launch, restart },
      startFleet: async (seed, plans) => {
        const fleet = await startFleet(mqttPort, seed, plans)
        started.push(fleet.stop)
        return fleet
      },
      complaints: () => complaints,
      signIn: async () => {
        const answer = await fetch(server().url + sessionEndpoints.signIn.path, {
          method: 'POST',
          headers: { 'Content-Type': 'application/json' },
          body: JSON.stringify({ email: house.people.lead.email, password: housePassword }),
        })
        return sessionEndpoints.signIn.response.parse(await answer.json()).token
      },
    }
  }
}

/** pino's numbers: 40 is a warning. */
const LogLine = z.object({ level: z.number().min(40), msg: z.string() })

function complaintIn(line: string): string | undefined {
  try {
    return LogLine.safeParse(JSON.parse(line)).data?.msg
  } catch {
    return undefined
  }
}

/** The present, milliseconds since 1970 UTC. */
export const nowMs = () => systemClock.now()
