import { join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { pino, type Logger } from 'pino'
import { systemClock } from '#shared/domain/clock.ts'
import { buildName } from './build-name.ts'
import { composeServer } from './compose.ts'
import { ConfigError, readConfig, type Config } from './config.ts'
import { openDatabase } from './db/database.ts'
import { migrate } from './db/migrate.ts'
import { openDemo, type Demo } from './demo/demo.ts'
import { PortTaken } from './listen.ts'
import { PostgresUnavailable, startPostgres } from './setup/postgres.ts'

/** How long everything together may take to stop, in milliseconds; then the process ends as it is. */
const stopWithinMs = 20_000

const root = fileURLToPath(new URL('../', import.meta.url))
const clock = systemClock

/** What was started, newest last; stopped in reverse. */
const started: { name: string; stop: () => Promise<void> }[] = []
let log: Logger | undefined
let stopping: Promise<void> | undefined

for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP'] as const) process.on(signal, () => void end(0))
process.on('uncaughtException', fail)
process.on('unhandledRejection', fail)

try {
  const config = readConfig()
  log = pino({ level: config.logLevel })
  await start(config, log)
} catch (error) {
  fail(error)
}

/** Configuration, database, schema, demo house, server, simulated fleet: each needs those before it. */
async function start(config: Config, log: Logger): Promise<void> {
  const databaseUrl = config.databaseUrl ?? (await startOwnPostgres(config, log))
  const demo = await prepareDatabase(databaseUrl, config, log)
  if (stopping) return
  const server = composeServer({
    databaseUrl,
    log,
    clock,
    tokenKey: config.secrets.tokenKey,
    build: buildName(root),
    http: { host: config.host, port: config.port },
    mqtt: { host: config.host, port: config.mqttPort },
    jobs: { retentionMonths: config.retentionMonths },
    demo: demo?.house,
    publicUrl: config.publicUrl,
    clientDir: join(root, 'dist/client'),
    trustProxy: config.trustProxy,
    checkAnswers: !config.production,
  })
  started.push({ name: 'server', stop: server.stop })
  const { httpPort, mqttPort } = await server.start()
  if (demo && mqttPort !== undefined) {
    const stop = demo.goLive({
      httpUrl: `http://127.0.0.1:${httpPort}`,
      mqttUrl: `mqtt://127.0.0.1:${mqttPort}`,
      forecasts: server.services.forecasts,
    })
    started.push({ name: 'demo house', stop })
  }
  const address = config.publicUrl ?? `http://${config.host}:${httpPort}`
  log.info({ mqttPort }, `Coalhand stands at ${address}. Ctrl-C stops it.`)
}

async function startOwnPostgres({ dataDir }: Config, log: Logger): Promise<string> {
  const postgres = await startPostgres({ dataDir, log: (line) => log.info(line) })
  started.push({ name: 'PostgreSQL', stop: postgres.stop })
  return postgres.url
}

async function prepareDatabase(databaseUrl: string, config: Config, log: Logger): Promise<Demo | undefined> {
  const db = openDatabase(databaseUrl, { max: 2 })
  started.push({ name: 'set-up', stop: () => db.destroy() })
  const ran = await migrate(db)
  if (ran.length > 0) log.info({ ran }, 'The schema is brought up to date')
  return openDemo({
    db,
    clock,
    log,
    wanted: config.demo,
    production: config.production,
    seed: config.demoSeed,
    password: config.secrets.demoPassword,
    deviceKey: config.secrets.tokenKey,
  })
}

/** Stops all that runs, newest first, and ends the process. */
function end(exitCode: number): Promise<void> {
  return (stopping ??= stopAll(exitCode))
}

async function stopAll(exitCode: number): Promise<void> {
  const hurry = setTimeout(() => {
    log?.error('Stopping took too long; what was acknowledged is stored')
    process.exit(1)
  }, stopWithinMs)
  hurry.unref()
  for (const { name, stop } of started.toReversed()) {
    await stop().catch((error: unknown) => log?.error({ err: error }, `Stopping the ${name} failed`))
  }
  log?.info('Stopped')
  process.exit(exitCode)
}

/** What a person can mend is told in one sentence; anything else with its trace. */
function fail(error: unknown): void {
  const plain =
    error instanceof ConfigError || error instanceof PortTaken || error instanceof PostgresUnavailable
  if (plain) console.error(`\n${error.message}\n`)
  else if (log) log.fatal({ err: error }, 'Coalhand cannot go on')
  else console.error(error)
  void end(1)
}
