import { checkRows } from '../exactness.ts'
import { livePlans, storedPlans } from '../house/devices.ts'
import { watchMemory } from '../house/memory.ts'
import { checkHealth, readHealth } from '../pages.ts'
import { nowMs, withWorld } from '../house/world.ts'
import { pause } from '../pause.ts'
import { duration, type Scenario } from '../report.ts'

const stormBoxes = 500
const liveBoxes = 20
const maxGrowthMb = 500

export const reconnectStorm: Scenario = {
  name: 'reconnect-storm',
  title: `${stormBoxes} boxes come back at once with an hour of readings each, while ${liveBoxes} send every second`,
  run: (report, seed) =>
    withWorld(stormBoxes + liveBoxes, { max_wal_size: '4GB' }, async (world) => {
      const live = world.devices.slice(0, liveBoxes)
      const stored = world.devices.slice(liveBoxes)
      const liveFleet = await world.startFleet(seed, livePlans(live, { nowMs: nowMs(), periodMs: 1_000 }))
      await liveFleet.nextAcknowledgement()
      await pause(2_000)
      const usual = await liveFleet.measure(15_000)
      report.figure(
        'live boxes before, publish to PUBACK',
        `median ${duration(usual.median)}, 99th ${duration(usual.p99)}`,
      )

      const memory = watchMemory(() => world.server().pid)
      await liveFleet.startMeasuring()
      const begun = nowMs()
      const stormFleet = await world.startFleet(seed, storedPlans(stored, { nowMs: begun, hours: 1 }))
      const waitingMost = mostWaiting(world)
      await stormFleet.finish()
      const inMs = nowMs() - begun
      const during = await liveFleet.delays()
      const storm = await stormFleet.counts()
      report.figure('all connected after', duration((storm.allConnectedAtMs ?? NaN) - begun))
      report.figure('turned away or lost on the way', `${storm.turnedAway} and ${storm.lost}`)
      report.figure('everything acknowledged, and so committed, after', duration(inMs))
      report.figure(
        'live boxes during, publish to PUBACK',
        `median ${duration(during.median)}, 99th ${duration(during.p99)}`,
      )
      report.figure('readings waiting in the server', `at most ${await waitingMost.stop()}`)
      report.check(
        'live readings go ahead of the stored: 99th under 2 s',
        during.count > 0 && during.p99 < 2_000,
        `${during.count} messages, longest ${duration(during.longest)}`,
      )
      const { before, highest } = memory.figures()
      memory.stop()
      report.figure(
        'memory of the server',
        `${before.toFixed(0)} MB before, at most ${highest.toFixed(0)} MB`,
      )
      report.check(`memory grew by less than ${maxGrowthMb} MB`, highest - before < maxGrowthMb)
      const found = await checkRows(report, world.db, [
        { fleet: liveFleet, devices: live },
        { fleet: stormFleet, devices: stored },
      ])
      report.figure('stored readings a second', Math.round(found.stored / (inMs / 1000)))
      report.check('the hour was whole', found.stored >= stormBoxes * 2_880, `${found.stored} rows`)
      await checkHealth(report, world, true)
      report.check('the server ran through', world.server().running())
      for (const [what, count] of world.complaints()) report.figure('logged', `${count} × ${what}`)
    }),
}

/** Looks twice a second how many readings wait. */
function mostWaiting(world: Parameters<typeof readHealth>[0]) {
  let most = 0
  const watch = new AbortController()
  const looking = (async () => {
    while (!watch.signal.aborted) {
      most = Math.max(most, (await readHealth(world))?.ingest.waiting ?? 0)
      await pause(500)
    }
  })()
  return {
    stop: async () => {
      watch.abort()
      await looking
      return most
    },
  }
}
