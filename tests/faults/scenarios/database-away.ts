import { checkRows } from '../exactness.ts'
import type { Fleet } from '../devices/fleet.ts'
import { livePlans } from '../house/devices.ts'
import { watchMemory } from '../house/memory.ts'
import { checkHealth, checkPagesWhileAway, openManyPages } from '../pages.ts'
import { nowMs, withWorld, type World } from '../house/world.ts'
import { pause } from '../pause.ts'
import { duration, type Report, type Scenario } from '../report.ts'

/** What the server may grow by while it holds readings that wait, in MB (10⁶ bytes). */
const maxGrowthMb = 400

interface Absence {
  awayMs: number
  begin: (world: World) => Promise<void>
  end: (world: World) => Promise<void>
}

export const stopPostgres: Scenario = {
  name: 'stop-postgres',
  title: 'PostgreSQL is stopped for two minutes under traffic',
  run: (report, seed) =>
    liveThrough(report, seed, {
      awayMs: 120_000,
      begin: ({ postgres }) => postgres.stop('fast'),
      end: ({ postgres }) => postgres.start(),
    }),
}

export const freezePostgres: Scenario = {
  name: 'freeze-postgres',
  title: 'PostgreSQL is frozen for a minute under traffic: connections stay open and nothing answers',
  run: (report, seed) =>
    liveThrough(report, seed, {
      awayMs: 60_000,
      begin: ({ postgres }) => postgres.freeze(),
      end: ({ postgres }) => postgres.thaw(),
    }),
}

/**
 * Twenty boxes that wait for their acknowledgements, and four that push on without, so that the server's own bound is
 * reached.
 */
async function liveThrough(report: Report, seed: string, absence: Absence): Promise<void> {
  await withWorld(24, {}, async (world) => {
    const calm = world.devices.slice(0, 20)
    const pushing = world.devices.slice(20)
    const start = nowMs()
    const calmFleet = await world.startFleet(seed, livePlans(calm, { nowMs: start, periodMs: 100 }))
    const pushingFleet = await world.startFleet(
      seed,
      livePlans(pushing, { nowMs: start, periodMs: 4, window: 60_000 }),
    )
    const fleets = [calmFleet, pushingFleet]
    report.figure('traffic', '20 boxes of 10 messages a second, 4 of 250 that wait for no acknowledgement')
    await Promise.all(fleets.map((fleet) => fleet.nextAcknowledgement()))
    const token = await world.signIn()
    await pause(3_000)
    await openManyPages(world, token)

    const memory = watchMemory(() => world.server().pid)
    await absence.begin(world)
    const gone = nowMs()
    await pause(1_000)
    const acknowledgedBefore = await acknowledged(fleets)
    await checkPagesWhileAway(report, world, token)
    await pause(gone + absence.awayMs - nowMs())
    await checkHealth(report, world, false)
    const acknowledgedAfter = await acknowledged(fleets)
    report.check(
      'nothing was acknowledged meanwhile',
      acknowledgedAfter - acknowledgedBefore === 0,
      `${acknowledgedAfter - acknowledgedBefore}`,
    )
    const { lost, pings, longestPingMs } = await calmFleet.counts()
    const lostOfPushing = (await pushingFleet.counts()).lost
    const { before, highest } = memory.figures()
    report.figure('away', duration(nowMs() - gone))
    report.figure('memory of the server', `${before.toFixed(0)} MB before, at most ${highest.toFixed(0)} MB`)

    const first = calmFleet.nextAcknowledgement()
    await absence.end(world)
    const back = nowMs()
    report.figure('first commit after its return', duration((await first) - back))
    await backlogGone(fleets)
    report.figure('backlog gone after its return', duration(nowMs() - back))
    report.check('no box lost its connection', lost + lostOfPushing === 0, `${lost} and ${lostOfPushing}`)
    report.check('pings were answered', longestPingMs < 2_000, `${pings}, slowest ${duration(longestPingMs)}`)
    const found = await checkRows(report, world.db, [
      { fleet: calmFleet, devices: calm },
      { fleet: pushingFleet, devices: pushing },
    ])
    report.check(
      'each channel caught up in order, the live ahead of the late',
      found.outOfOrder === 0,
      `${found.outOfOrder} rows late`,
    )
    const growth = memory.figures().highest - before
    memory.stop()
    report.check(
      `memory grew by less than ${maxGrowthMb} MB`,
      growth < maxGrowthMb,
      `${growth.toFixed(0)} MB`,
    )
    await checkHealth(report, world, true)
    report.check('the server ran through', world.server().running())
    for (const [what, count] of world.complaints()) report.figure('logged', `${count} × ${what}`)
  })
}

async function acknowledged(fleets: readonly Fleet[]): Promise<number> {
  const counts = await Promise.all(fleets.map((fleet) => fleet.counts()))
  return counts.reduce((sum, one) => sum + one.acknowledged, 0)
}

/** Waits until what fell due before is acknowledged and only what has just fallen due is not. */
async function backlogGone(fleets: readonly Fleet[]): Promise<void> {
  for (;;) {
    const counts = await Promise.all(fleets.map((fleet) => fleet.counts()))
    if (counts.every(({ due, acknowledged, boxes }) => due - acknowledged < 10 * boxes)) return
    await pause(50)
  }
}
