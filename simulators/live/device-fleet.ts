import type { Clock } from '#shared/domain/clock.ts'
import { seededRandom } from '#shared/domain/random.ts'

import { deviceHealth } from './device-health.ts'
import { createDevicePublisher, type DeviceCredentials } from './device-publisher.ts'
import type { LiveHouse } from './live-house.ts'

/** All devices of the house, each on a connection of its own. */
export interface DeviceFleet {
  /** Lets every device report the present moment. */
  report(house: LiveHouse): void
  /** Lets devices report minutes that they had not been rid of when they were last heard, ms since 1970 UTC. */
  catchUp(house: LiveHouse, lastHeardMs: (credentials: DeviceCredentials) => number | undefined): void
  readonly connected: number
  stop(): Promise<void>
}

/** A reading every five seconds, on whole multiples: what was back-filled lies on the same moments. */
export const REPORT_MS = 5000

/** How far back a device remembers what it could not send. */
const MEMORY_MS = 12 * 3_600_000

export function createDeviceFleet(options: {
  url: string
  devices: readonly DeviceCredentials[]
  clock: Clock
  onTrouble: (device: DeviceCredentials, message: string) => void
}): DeviceFleet {
  const { url, devices, clock, onTrouble } = options
  const publishers = devices.map((credentials) => ({
    credentials,
    publisher: createDevicePublisher({
      url,
      credentials,
      random: seededRandom(credentials.username, clock.now()),
      health: deviceHealth(`${credentials.site}/${credentials.device}`),
      onTrouble: (message) => {
        onTrouble(credentials, message)
      },
    }),
  }))
  return {
    report(house) {
      const atMs = Math.floor(clock.now() / REPORT_MS) * REPORT_MS
      for (const { credentials, publisher } of publishers) {
        publisher.report({ atMs, values: house.deviceValues(credentials.site, credentials.device, atMs) })
      }
    },
    catchUp(house, lastHeardMs) {
      const nowMs = clock.now()
      for (const { credentials, publisher } of publishers) {
        const heardMs = lastHeardMs(credentials)
        if (heardMs === undefined) continue
        const fromMs = Math.max(heardMs, nowMs - MEMORY_MS)
        for (let atMs = Math.ceil((fromMs + 1) / 60_000) * 60_000; atMs < nowMs - REPORT_MS; atMs += 60_000) {
          publisher.report({ atMs, values: house.deviceValues(credentials.site, credentials.device, atMs) })
        }
      }
    },
    get connected() {
      return publishers.filter(({ publisher }) => publisher.connected).length
    },
    async stop() {
      await Promise.all(publishers.map(({ publisher }) => publisher.stop()))
    },
  }
}
