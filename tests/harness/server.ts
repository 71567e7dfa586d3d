import { pino } from 'pino'
import supertest from 'supertest'
import { systemClock, type Clock } from '#shared/domain/clock.ts'
import type { Role } from '#shared/domain/permissions.ts'
import type { Knex } from 'knex'
import { composeServer, type ComposedServer, type ServerDeps } from '../../server/compose.ts'
import { openDatabase } from '../../server/db/database.ts'
import { makeHouse, type House } from './house.ts'
import { freshDatabase } from './postgres.ts'

export interface TestServer {
  house: House
  /** A way to the database besides the server's own. */
  db: Knex
  databaseUrl: string
  server: ComposedServer
  /** `http://127.0.0.1:PORT`. */
  url: string
  /** Where devices connect; 0 without a broker. */
  mqttPort: number
  /** Requests by nobody. */
  api: supertest.Agent
  /** Requests by the person who has this role at the house's own site. */
  as(role: Role | 'stranger'): supertest.Agent
  /** An access token of that person. */
  tokenOf(role: Role | 'stranger'): string
  stop(): Promise<void>
}

const loopback = { host: '127.0.0.1', port: 0 }

/**
 * The whole server with a small house in a database of its own, on free ports.
 * @param options what differs from the usual; `mqtt: { host, port: 0 }` starts the broker too
 * @param databasePort where to reach PostgreSQL instead, such as through a proxy
 */
export async function startTestServer(
  options: Partial<ServerDeps> = {},
  { databasePort }: { databasePort?: number } = {},
): Promise<TestServer> {
  const clock: Clock = options.clock ?? systemClock
  const database = await freshDatabase()
  const db = openDatabase(database.url, { max: 4 })
  const house = await makeHouse(db)
  const databaseUrl = new URL(database.url)
  if (databasePort !== undefined) databaseUrl.port = String(databasePort)
  const server = composeServer({
    log: pino({ level: 'silent' }),
    tokenKey: 'a key for tests only, of no use elsewhere',
    build: 'test',
    checkAnswers: true,
    passwordCost: 4,
    http: loopback,
    databaseUrl: databaseUrl.href,
    ...options,
    clock,
  })
  const { httpPort, mqttPort } = await server.start()
  const url = `http://127.0.0.1:${httpPort}`
  const tokenOf = (role: Role | 'stranger') =>
    server.services.sessions.issueAccessToken(role === 'stranger' ? house.stranger.id : house.people[role].id)
  return {
    house,
    db,
    databaseUrl: database.url,
    server,
    url,
    mqttPort: mqttPort ?? 0,
    api: supertest.agent(url),
    as: (role) => supertest.agent(url).set('Authorization', `Bearer ${tokenOf(role)}`),
    tokenOf,
    stop: async () => {
      await server.stop()
      await db.destroy()
      await database.drop()
    },
  }
}
