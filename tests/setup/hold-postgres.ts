// A process of its own that holds PostgreSQL until it is told to end, or killed.
import { startPostgres } from '../../server/setup/postgres.ts'

const [dataDir = ''] = process.argv.slice(2)
const running = await startPostgres({ dataDir, log: () => undefined })
const stay = setInterval(() => undefined, 60_000)
process.on('SIGTERM', () => {
  clearInterval(stay)
  void running.stop()
})
console.log('ready')
