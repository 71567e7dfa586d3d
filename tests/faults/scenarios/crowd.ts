import { livePath } from '#shared/contract/live.ts'
import { sessionEndpoints } from '#shared/contract/session.ts'
import { startCrowd, type Crowd } from '../crowds/crowd.ts'
import type { Fleet } from '../devices/fleet.ts'
import { checkRows } from '../exactness.ts'
import { livePlans } from '../house/devices.ts'
import { watchMemory } from '../house/memory.ts'
import { nowMs, withWorld, worldSite, type World } from '../house/world.ts'
import { pause } from '../pause.ts'
import { duration, type Report, type Scenario } from '../report.ts'

const boxes = 20
const connections = 2_000
const measuredMs = 20_000
const maxGrowthMb = 400

export const flood: Scenario = {
  name: 'flood',
  title: 'three devices flood at QoS 0: two with readings, one with its status',
  run: (report, seed) =>
    underCrowd(report, seed, {
      crowdDevices: 3,
      settleMs: 3_000,
      keepsToProtocol: true,
      gather: (world) =>
        startCrowd({ kind: 'flood', port: world.mqttPort, members: world.devices.slice(boxes) }),
    }),
}

export const manyConnections: Scenario = {
  name: 'many-connections',
  title: `${connections} connections: idle, in the middle of a packet, or without a word`,
  run: (report, seed) =>
    underCrowd(report, seed, {
      crowdDevices: 500,
      settleMs: 3_000,
      keepsToProtocol: true,
      gather: (world) =>
        startCrowd({ kind: 'idle', port: world.mqttPort, members: world.devices.slice(boxes), connections }),
    }),
}

export const deafDevices: Scenario = {
  name: 'deaf-devices',
  title: 'forty MQTT subscribers never read the 60 kB that come for them twenty-five times a second',
  run: (report, seed) =>
    underCrowd(report, seed, {
      // The kernel's buffers take some megabytes a socket first.
      crowdDevices: 8,
      settleMs: 20_000,
      keepsToProtocol: false,
      gather: (world) =>
        startCrowd({
          kind: 'deaf-devices',
          port: world.mqttPort,
          members: world.devices.slice(boxes),
          listeners: 5,
        }),
    }),
}

export const deafPages: Scenario = {
  name: 'deaf-pages',
  title: 'forty WebSockets never read, ten of them ask for the whole state five times a second',
  run: (report, seed) =>
    underCrowd(report, seed, {
      // Two hundred channels with the boxes': a large house.
      crowdDevices: 30,
      settleMs: 20_000,
      keepsToProtocol: false,
      gather: async (world) =>
        startCrowd({
          kind: 'deaf-pages',
          url: world.server().url,
          path: livePath,
          site: worldSite,
          tickets: await tickets(world, 40),
          asking: 10,
        }),
    }),
}

interface CrowdKind {
  /** Devices besides the well-behaved boxes; with four channels each. */
  crowdDevices: number
  /** From its beginning to the measurement, in ms. */
  settleMs: number
  /** It does nothing that a device may be turned out for. */
  keepsToProtocol: boolean
  gather: (world: World) => Promise<Crowd>
}

/** Measures the delay of well-behaved boxes, before and during, on the same schedule. */
async function underCrowd(
  report: Report,
  seed: string,
  { crowdDevices, settleMs, keepsToProtocol, gather }: CrowdKind,
): Promise<void> {
  await withWorld(boxes + crowdDevices, {}, async (world) => {
    const devices = world.devices.slice(0, boxes)
    const fleet = await world.startFleet(seed, livePlans(devices, { nowMs: nowMs(), periodMs: 100 }))
    await fleet.nextAcknowledgement()
    await pause(5_000)
    const usual = await measured(report, 'usual', fleet)
    const memory = watchMemory(() => world.server().pid)
    await fleet.startMeasuring()
    const crowd = await gather(world)
    try {
      await pause(settleMs)
      const gathering = await fleet.delays()
      report.figure('while they gather', words(gathering))
      const before = crowd.counts()
      const during = await measured(report, 'with them', fleet)
      const after = crowd.counts()
      report.figure(
        'the crowd',
        `${after.connected} connected, ${after.lost} turned out, ${Math.round(
          (after.sent - before.sent) / (measuredMs / 1000),
        )} messages a second`,
      )
      if (keepsToProtocol) report.check('nobody was turned out', after.lost === 0, `${after.lost}`)
      check(report, 'median', usual.median, during.median)
      check(report, '99th', usual.p99, during.p99)
    } finally {
      await crowd.stop()
    }
    const { before, highest } = memory.figures()
    memory.stop()
    report.figure('memory of the server', `${before.toFixed(0)} MB before, at most ${highest.toFixed(0)} MB`)
    report.check(`memory grew by less than ${maxGrowthMb} MB`, highest - before < maxGrowthMb)
    const { lost } = await fleet.counts()
    report.check('no box lost its connection', lost === 0, `${lost}`)
    report.check('the server ran through', world.server().running())
    for (const [what, count] of world.complaints()) report.figure('logged', `${count} × ${what}`)
    await fleet.finish()
    await settled(world)
    await checkRows(report, world.db, [{ fleet, devices }])
  })
}

/** Waits until what the crowd had still on the way is stored. */
async function settled(world: World): Promise<void> {
  const rows = async () => Number((await world.db('readings').count())[0]?.['count'])
  for (let before = -1, now = await rows(); now > before;) {
    await pause(1_000)
    before = now
    now = await rows()
  }
}

async function measured(report: Report, when: string, fleet: Fleet) {
  const delays = await fleet.measure(measuredMs)
  report.figure(`publish to PUBACK, ${when}`, words(delays))
  return delays
}

function words({ count, median, p99, longest }: Awaited<ReturnType<Fleet['delays']>>): string {
  return `median ${duration(median)}, 99th ${duration(p99)}, longest ${duration(longest)} of ${count}`
}

function check(report: Report, which: string, usualMs: number, duringMs: number): void {
  report.check(
    `${which} under twice the usual`,
    duringMs < 2 * usualMs,
    `${(duringMs / usualMs).toFixed(2)} times`,
  )
}

async function tickets(world: World, count: number): Promise<string[]> {
  const token = await world.signIn()
  return Promise.all(
    Array.from({ length: count }, async () => {
      const answer = await fetch(world.server().url + sessionEndpoints.liveTicket.path, {
        method: 'POST',
        headers: { Authorization: `Bearer ${token}` },
      })
      return sessionEndpoints.liveTicket.response.parse(await answer.json()).ticket
    }),
  )
}
