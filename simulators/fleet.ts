import { readFileSync, statSync } from 'node:fs'
import { createInterface } from 'node:readline'
import { setTimeout as pause } from 'node:timers/promises'
import { parseArgs } from 'node:util'

import { systemClock } from '#shared/domain/clock.ts'
import { pino } from 'pino'

import { decideCrew } from './crew.ts'
import { FleetCredentials } from './live/credentials.ts'
import { createCrewWorker } from './live/crew-worker.ts'
import { createDeviceFleet, REPORT_MS } from './live/device-fleet.ts'
import { createHouseApi } from './live/house-api.ts'
import { lastHeard } from './live/last-heard.ts'
import { createNightWatch } from './live/night-watch.ts'

/**
 * The demo house's devices and crew, as a process of their own:
 * `node --import tsx simulators/fleet.ts --mqtt mqtt://127.0.0.1:1883 --http http://127.0.0.1:8080 --seed 1`
 * with `FleetCredentials` as one line of JSON on standard input, or in a file of mode 600 named by `--credentials`.
 * It runs until it is told to stop by SIGTERM or SIGINT, or, when it got its credentials on standard input, until
 * that closes: whoever started it is gone then.
 */
async function main(): Promise<void> {
  const { values } = parseArgs({
    options: {
      mqtt: { type: 'string' },
      http: { type: 'string' },
      seed: { type: 'string', default: '1' },
      credentials: { type: 'string' },
      level: { type: 'string', default: 'info' },
    },
  })
  const { mqtt: mqttUrl, http: baseUrl, seed: houseSeed } = values
  if (mqttUrl === undefined || baseUrl === undefined) throw new Error('Say where: --mqtt URL and --http URL.')
  const log = pino({ name: 'fleet', level: values.level })
  const stopping = new AbortController()
  const stop = () => {
    stopping.abort()
  }
  process.once('SIGTERM', stop)
  process.once('SIGINT', stop)
  const credentials = FleetCredentials.parse(
    JSON.parse(values.credentials === undefined ? await firstLine(stop) : readPrivate(values.credentials)),
  )
  const { devices, crew } = credentials
  const clock = systemClock
  const api = createHouseApi({ baseUrl, account: crew, clock })
  const sites = [...new Set(devices.map(({ site }) => site))]
  const watch = createNightWatch({ api, sites, houseSeed, clock })
  let misses = 0
  const worker = createCrewWorker({
    api,
    onDone: (action) => log.info({ action }, 'The crew did something'),
    onRefused: (action, reason) => log.warn({ action, reason }, 'The crew was refused'),
  })
  await lookUntilSeen()
  const fleet = createDeviceFleet({
    url: mqttUrl,
    devices,
    clock,
    onTrouble: (device, reason) =>
      log.warn({ device: device.device, reason }, 'A device lost its connection'),
  })
  const first = watch.house()
  if (first !== undefined) fleet.catchUp(first, lastHeard(watch.states()))
  log.info({ devices: devices.length, sites }, 'The house is live')
  await Promise.all([keepReporting(), keepLooking()])
  await fleet.stop()
  log.info('The house has stopped')

  /** The server may still be starting. */
  async function lookUntilSeen(): Promise<void> {
    while (!stopping.signal.aborted) {
      await lookOnce()
      if (watch.house() !== undefined) return
      await rest(lookAgainMs())
    }
  }

  async function keepReporting(): Promise<void> {
    while (!stopping.signal.aborted) {
      const house = watch.house()
      if (house !== undefined) fleet.report(house)
      await rest(REPORT_MS - (clock.now() % REPORT_MS))
    }
  }

  async function keepLooking(): Promise<void> {
    while (!stopping.signal.aborted) {
      await lookOnce()
      const house = watch.house()
      if (house !== undefined && crew.works) await workOnce(house)
      await rest(lookAgainMs())
    }
  }

  async function lookOnce(): Promise<void> {
    try {
      await watch.look()
      misses = 0
    } catch (error) {
      misses += 1
      log.warn({ reason: messageOf(error) }, 'The house cannot be asked just now')
    }
  }

  /** Soon; less often while nobody answers. */
  function lookAgainMs(): number {
    return LOOK_MS * 2 ** Math.min(misses, 4)
  }

  async function workOnce(house: NonNullable<ReturnType<typeof watch.house>>): Promise<void> {
    try {
      for (const state of watch.states()) {
        await worker.work(decideCrew({ houseSeed, state, house, nowMs: clock.now() }))
      }
    } catch (error) {
      log.warn({ reason: messageOf(error) }, 'The crew could not log just now')
    }
  }

  async function rest(ms: number): Promise<void> {
    await pause(ms, undefined, { signal: stopping.signal }).catch(() => undefined)
  }
}

/** The first line of standard input; `onClosed` is called once nothing can come from there any more. */
async function firstLine(onClosed: () => void): Promise<string> {
  const lines = createInterface({ input: process.stdin })
  return new Promise((resolve, reject) => {
    lines.once('line', resolve)
    lines.once('close', () => {
      reject(new Error('Standard input closed before the credentials came.'))
      onClosed()
    })
  })
}

/** A file with secrets in it, that only its owner may read. */
function readPrivate(file: string): string {
  if ((statSync(file).mode & 0o077) !== 0) throw new Error(`${file} may be read by others: chmod 600 it.`)
  return readFileSync(file, 'utf8')
}

function messageOf(error: unknown): string {
  return error instanceof Error ? error.message : String(error)
}

const LOOK_MS = 3000

await main()
