import { seededRandom } from '#shared/domain/random.ts'
import { checkRows } from '../exactness.ts'
import { livePlans } from '../house/devices.ts'
import { nowMs, withWorld } from '../house/world.ts'
import { pause } from '../pause.ts'
import { median, spread, type Scenario } from '../report.ts'

const kills = 20
const killsWhileStarting = 4

export const killServer: Scenario = {
  name: 'kill-server',
  title: `the server is killed with -9 ${kills} times under traffic, ${killsWhileStarting} times more while it starts`,
  run: (report, seed) =>
    withWorld(20, {}, async (world) => {
      const { devices } = world
      const fleet = await world.startFleet(seed, livePlans(devices, { nowMs: nowMs(), periodMs: 50 }))
      report.figure(
        'traffic',
        '20 boxes, 400 messages or 1,600 readings a second; back 0.2 to 0.3 s after a loss',
      )
      const random = seededRandom('kills', seed)
      await fleet.nextAcknowledgement()
      const startMs: number[] = []
      const commitMs: number[] = []
      for (let kill = 0; kill < kills; kill++) {
        await pause(200 + 2_000 * random.uniform())
        await world.server().kill()
        if (kill % (kills / killsWhileStarting) === 0) {
          const early = world.launch()
          await pause(median([...startMs, 1_000]) * random.uniform())
          await early.kill()
        }
        const begun = nowMs()
        const first = fleet.nextAcknowledgement()
        await world.restart()
        startMs.push(nowMs() - begun)
        commitMs.push((await first) - begun)
      }
      report.figure('restart to listening', spread(startMs))
      report.figure('restart to first commit', spread(commitMs))
      await checkRows(report, world.db, [{ fleet, devices }])
      const { lost } = await fleet.counts()
      report.check('every kill met every box', lost >= kills * devices.length, `${lost} connections lost`)
    }),
}
