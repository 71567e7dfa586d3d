import pg from 'pg'
import { checkRows } from '../exactness.ts'
import { livePlans } from '../house/devices.ts'
import { nowMs, withWorld } from '../house/world.ts'
import { pause } from '../pause.ts'
import { duration, type Scenario } from '../report.ts'

const maxConnections = 30
const heldMs = 20_000

export const outOfConnections: Scenario = {
  name: 'out-of-connections',
  title: 'somebody takes every connection of PostgreSQL, the server’s own too, for 20 s',
  run: (report, seed) =>
    withWorld(20, { max_connections: String(maxConnections) }, async (world) => {
      const { devices, postgres } = world
      const fleet = await world.startFleet(seed, livePlans(devices, { nowMs: nowMs(), periodMs: 50 }))
      await fleet.nextAcknowledgement()
      await pause(2_000)
      const hog = await holdAllConnections(postgres.url)
      const taken = nowMs()
      await pause(2_000)
      const before = (await fleet.counts()).acknowledged
      await pause(taken + heldMs - nowMs())
      const during = (await fleet.counts()).acknowledged - before
      report.figure('connections held', hog.held())
      report.check('the server had none', during === 0, `${during} messages acknowledged meanwhile`)
      report.check('the server ran through', world.server().running())
      const first = fleet.nextAcknowledgement()
      await hog.release()
      const released = nowMs()
      report.figure('first commit after the release', duration((await first) - released))
      await pause(2_000)
      await checkRows(report, world.db, [{ fleet, devices }])
      const { lost } = await fleet.counts()
      report.check('no box lost its connection', lost === 0, `${lost}`)
      for (const [what, count] of world.complaints()) report.figure('logged', `${count} × ${what}`)
    }),
}

/** Connects until there is no slot left, ends everyone else's connections, and takes those slots as well. */
async function holdAllConnections(url: string) {
  const clients: pg.Client[] = []
  const hold = new AbortController()

  async function take(): Promise<boolean> {
    const client = new pg.Client({ connectionString: url, application_name: 'hog' })
    client.on('error', () => undefined)
    try {
      await client.connect()
    } catch {
      return false
    }
    clients.push(client)
    return true
  }

  const first = await take()
  if (!first) throw new Error('There was no connection to take.')
  const evict = () =>
    clients[0]?.query(
      `select pg_terminate_backend(pid) from pg_stat_activity where application_name like 'coalhand%' and pid <> pg_backend_pid()`,
    )
  while (await take());
  await evict()
  // The server tries to get connections back all the time: whatever becomes free is taken first, or taken away.
  const keepOn = (async () => {
    while (!hold.signal.aborted) {
      const got = await Promise.all(Array.from({ length: 4 }, take))
      if (!got.some(Boolean)) await evict()
      await pause(5)
    }
  })()
  await pause(500)
  return {
    held: () => clients.length,
    release: async () => {
      hold.abort()
      await keepOn
      await Promise.all(clients.map((client) => client.end()))
    },
  }
}
