import { pino } from 'pino'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../server/compose.ts'

/** The server as it is in earnest, without its set-up: `tsx serve.ts DATABASE_URL MQTT_PORT`. Says when it listens. */
const [databaseUrl = '', mqttPort = ''] = process.argv.slice(2)
const server = composeServer({
  databaseUrl,
  log: pino({ level: 'error' }, pino.destination(2)),
  clock: systemClock,
  tokenKey: 'a key for tests only, of no use elsewhere',
  build: 'test',
  http: { host: '127.0.0.1', port: 0 },
  mqtt: { host: '127.0.0.1', port: Number(mqttPort) },
})
await server.start()
console.log('listens')
