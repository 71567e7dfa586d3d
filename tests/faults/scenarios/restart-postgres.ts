import { checkRows } from '../exactness.ts'
import { livePlans } from '../house/devices.ts'
import { nowMs, withWorld } from '../house/world.ts'
import { pause } from '../pause.ts'
import { duration, type Scenario } from '../report.ts'

const rounds = 3

export const restartPostgres: Scenario = {
  name: 'restart-postgres',
  title: 'PostgreSQL is restarted (fast, immediate) and its postmaster killed with -9 under traffic',
  run: (report, seed) =>
    withWorld(20, {}, async (world) => {
      const { devices, postgres } = world
      const fleet = await world.startFleet(seed, livePlans(devices, { nowMs: nowMs(), periodMs: 50 }))
      await fleet.nextAcknowledgement()
      const ways = {
        'restart, fast': () => postgres.restart('fast'),
        'restart, immediate': () => postgres.restart('immediate'),
        'postmaster killed, then started as Coalhand does': async () => {
          await postgres.killPostmaster()
          await postgres.recover()
        },
      }
      for (const [way, restart] of Object.entries(ways)) {
        for (let round = 1; round <= rounds; round++) {
          await pause(1_500)
          const begun = nowMs()
          await restart()
          const back = nowMs()
          const committed = await fleet.nextAcknowledgement()
          report.figure(
            `${way}, ${round}`,
            `away ${duration(back - begun)}, first commit ${duration(committed - back)} after it was back`,
          )
          report.check('first commit within 5 s of its return', committed - back < 5_000)
        }
      }
      await checkRows(report, world.db, [{ fleet, devices }])
      const { lost, longestPingMs } = await fleet.counts()
      report.check('no box lost its connection', lost === 0, `${lost}`)
      report.check('pings were answered', longestPingMs < 2_000, `slowest ${duration(longestPingMs)}`)
      report.check('the server ran through', world.server().running())
    }),
}
