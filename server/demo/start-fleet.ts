import { spawn, type ChildProcess } from 'node:child_process'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import type { Logger } from 'pino'
import { z } from 'zod'
import { demoUsername } from '../../seeds/demo-house.ts'
import { demoPeople, demoSites } from '../../simulators/demo/house.ts'
import type { FleetCredentials } from '../../simulators/live/credentials.ts'
import { deviceSecret } from './seed-demo.ts'

export interface FleetOptions {
  /** Where the broker takes devices, such as `mqtt://127.0.0.1:1883`. */
  mqttUrl: string
  /** Where the API is, such as `http://127.0.0.1:8080`. */
  httpUrl: string
  /** The demo house's own. */
  seed: number
  password: string
  deviceKey: string
  /** Whether its crew logs wraps and pulls and starts the next night. */
  crewWorks?: boolean
  log: Logger
}

export interface Fleet {
  /** The number of the process that runs now, or ran last. */
  pid: () => number | undefined
  stop: () => Promise<void>
}

/** How long a fleet that ended is waited for before the next is started, ms: longer each time it dies early. */
const firstPauseMs = 1000
const longestPauseMs = 60_000
/** A fleet that ran so long was well. */
const healthyMs = 60_000
/** How long it may take to say goodbye, ms. */
const farewellMs = 3000

/**
 * Starts the demo house's devices and crew as a process of their own, which reaches the server as real ones would:
 * through the broker and the API. Started again when it dies. Its credentials go through standard input, so that no
 * list of processes shows them; when this process dies, that closes and the fleet ends too.
 */
export function startFleet(options: FleetOptions): Fleet {
  const log = options.log.child({ part: 'fleet' })
  const ending = new AbortController()
  let child: ChildProcess | undefined
  let timer: NodeJS.Timeout | undefined
  let pauseMs = firstPauseMs

  const launch = () => {
    const begun = performance.now()
    const fleet = spawnFleet(options)
    child = fleet
    passOn(fleet, log)
    fleet.once('error', (error) => log.warn({ err: error }, 'The demo fleet could not be started'))
    fleet.once('close', (code, signal) => {
      if (ending.signal.aborted) return
      pauseMs = performance.now() - begun > healthyMs ? firstPauseMs : Math.min(2 * pauseMs, longestPauseMs)
      log.warn({ code, signal, pauseMs }, 'The demo fleet ended; it is started again')
      timer = setTimeout(launch, pauseMs)
    })
  }
  launch()

  return {
    pid: () => child?.pid,
    async stop() {
      ending.abort()
      clearTimeout(timer)
      if (child) await end(child)
    },
  }
}

const root = fileURLToPath(new URL('../../', import.meta.url))

function spawnFleet(options: FleetOptions) {
  const { mqttUrl, httpUrl, seed } = options
  const where = ['--mqtt', mqttUrl, '--http', httpUrl, '--seed', String(seed)]
  const fleet = spawn(process.execPath, ['--import', 'tsx', 'simulators/fleet.ts', ...where], {
    cwd: root,
    stdio: 'pipe',
    // Out of the terminal's group: Ctrl-C reaches the server only, which ends the fleet in its turn. It needs nothing
    // of the server's environment, which may hold secrets.
    detached: true,
    env: {},
  })
  // A fleet that died at once has closed its input: its end is told by `close`.
  fleet.stdin.on('error', () => undefined)
  fleet.stdin.write(`${JSON.stringify(credentialsOf(options))}\n`)
  return fleet
}

function credentialsOf({ password, deviceKey, crewWorks = true }: FleetOptions): FleetCredentials {
  const lead = demoPeople.find((person) => person.roles['quarry-road'].includes('lead'))
  if (!lead) throw new Error('The demo house has nobody who leads the crew.')
  return {
    devices: demoSites.flatMap((site) =>
      site.devices.map((device) => {
        const username = demoUsername(site, device)
        return { site: site.slug, device: device.slug, username, secret: deviceSecret(deviceKey, username) }
      }),
    ),
    crew: { email: lead.email, password, works: crewWorks },
  }
}

const LogLine = z.looseObject({ level: z.number(), msg: z.string() })

/** Takes the fleet's log into the server's; what is not a line of it goes there as it is. */
function passOn(fleet: ReturnType<typeof spawnFleet>, log: Logger): void {
  createInterface({ input: fleet.stdout }).on('line', (line) => {
    const { level, msg, ...rest } = readLine(line)
    const about = Object.fromEntries(
      Object.entries(rest).filter(([field]) => !['time', 'pid', 'hostname', 'name'].includes(field)),
    )
    if (level >= 40) log.warn(about, msg)
    else log.debug(about, msg)
  })
  createInterface({ input: fleet.stderr }).on('line', (line) => log.warn(line))
}

function readLine(line: string): z.infer<typeof LogLine> {
  try {
    return LogLine.parse(JSON.parse(line))
  } catch {
    return { level: 30, msg: line }
  }
}

async function end(fleet: ChildProcess): Promise<void> {
  if (fleet.pid === undefined || fleet.exitCode !== null || fleet.signalCode !== null) return
  const ended = new Promise((resolve) => fleet.once('close', resolve))
  fleet.kill('SIGTERM')
  fleet.stdin?.end()
  const patience = setTimeout(() => fleet.kill('SIGKILL'), farewellMs)
  await ended
  clearTimeout(patience)
}
