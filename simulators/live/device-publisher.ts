import { readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import type { SenmlRecord } from '#shared/contract/senml.ts'
import type { Random } from '#shared/domain/random.ts'
import { setTimeout as pause } from 'node:timers/promises'
import mqtt, { type MqttClient } from 'mqtt'

import { createOutbox, senmlPack, type DeviceReport } from './outbox.ts'

/** What a device signs in with. */
export interface DeviceCredentials {
  site: string
  device: string
  username: string
  secret: string
}

/** One device's connection. */
export interface DevicePublisher {
  /** Takes a report in and sends it as soon as that is possible. */
  report(report: DeviceReport): void
  readonly connected: boolean
  readonly waiting: number
  stop(): Promise<void>
}

/**
 * Publishes a device's reports at QoS 1 over MQTT 3.1.1, one pack in flight, the next after its acknowledgement; keeps
 * what was not acknowledged; comes back after a loss with a growing, jittered delay; says `online`, retained, when
 * it connects and leaves `offline` as its last will.
 */
export function createDevicePublisher(options: {
  url: string
  credentials: DeviceCredentials
  random: Random
  /** Sent along with a pack: battery and radio. */
  health: (atMs: number) => SenmlRecord[]
  onTrouble: (message: string) => void
}): DevicePublisher {
  const { url, credentials, random, health, onTrouble } = options
  const readings = readingsTopic(credentials.site, credentials.device)
  const status = statusTopic(credentials.site, credentials.device)
  const outbox = createOutbox()
  let client: MqttClient | undefined
  let connected = false
  let stopped = false
  let failures = 0
  let healthMinute = -1
  let retry: NodeJS.Timeout | undefined

  const connect = () => {
    const own = mqtt.connect(url, {
      protocolVersion: 4,
      clientId: credentials.device,
      username: credentials.username,
      password: credentials.secret,
      keepalive: 20,
      connectTimeout: 10_000,
      // Coming back is done here, with a connection of its own each time and nothing carried over: what was not
      // acknowledged is in the outbox.
      reconnectPeriod: 0,
      will: { topic: status, payload: 'offline', qos: 1, retain: true },
    })
    client = own
    own.on('connect', () => {
      connected = true
      failures = 0
      own.publish(status, 'online', { qos: 1, retain: true })
      send()
    })
    own.on('error', (error) => {
      // Said once a loss, not once a try.
      if (failures === 0) onTrouble(error.message)
    })
    own.on('close', () => {
      if (client !== own) return
      connected = false
      client = undefined
      outbox.failed()
      own.end(true)
      if (!stopped) retry = setTimeout(connect, backoffMs(failures++, random))
    })
  }

  const send = () => {
    const own = client
    if (own === undefined || !connected) return
    const reports = outbox.next()
    if (reports === undefined) return
    const newestMs = reports.at(-1)?.atMs ?? 0
    const minute = Math.floor(newestMs / 60_000)
    const extra = reports.length === 1 && minute > healthMinute ? health(newestMs) : []
    if (extra.length > 0) healthMinute = minute
    own.publish(readings, JSON.stringify(senmlPack(reports, extra)), { qos: 1 }, (error) => {
      if (client !== own) return
      if (error) outbox.failed()
      else outbox.arrived()
      if (!error) send()
    })
  }

  connect()
  return {
    report(report) {
      outbox.add(report)
      send()
    },
    get connected() {
      return connected
    },
    get waiting() {
      return outbox.waiting
    },
    async stop() {
      stopped = true
      clearTimeout(retry)
      const own = client
      if (own === undefined) return
      // A device that is switched off says so; the will is for one that drops.
      if (connected) {
        const said = own.publishAsync(status, 'offline', { qos: 1, retain: true }).catch(() => undefined)
        await Promise.race([said, pause(FAREWELL_MS)])
      }
      client = undefined
      connected = false
      await own.endAsync(true)
    },
  }
}

/** A broker that does not answer is not waited for, ms. */
const FAREWELL_MS = 500

/** From half a second up to 15 s, doubled with each failure, half of it by chance. */
export function backoffMs(failures: number, random: Random): number {
  const most = Math.min(15_000, 500 * 2 ** Math.min(failures, 10))
  return most * (0.5 + 0.5 * random.uniform())
}
