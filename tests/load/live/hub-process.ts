// The server of the live benchmark, in a process of its own: it takes readings by MQTT and shows them to pages. Its
// first line says where; for each number that it reads it prints so many tickets, which are good for half a minute.
import { createInterface } from 'node:readline'
import { z } from 'zod'
import { pino } from 'pino'
import { systemClock } from '#shared/domain/clock.ts'
import { composeServer } from '../../../server/compose.ts'

const { databaseUrl, userId, siteId } = z
  .object({ databaseUrl: z.string(), userId: z.int(), siteId: z.int() })
  .parse(JSON.parse(process.argv[2] ?? ''))

const server = composeServer({
  databaseUrl,
  clock: systemClock,
  log: pino({ level: 'warn' }, process.stderr),
  tokenKey: 'only for this benchmark',
  build: 'benchmark',
  http: { host: '127.0.0.1', port: 0 },
  mqtt: { host: '127.0.0.1', port: 0 },
})
const { httpPort, mqttPort } = await server.start()
const person = { userId, name: 'Page', rolesBySite: new Map([[siteId, ['crew' as const]]]) }
console.log(JSON.stringify({ httpPort, mqttPort }))
createInterface({ input: process.stdin }).on('line', (count) => {
  const tickets = Array.from({ length: Number(count) }, () => server.services.tickets.issue(person))
  console.log(JSON.stringify(tickets))
})
process.on('SIGTERM', () => {
  void server.stop().then(() => process.exit(0))
})
