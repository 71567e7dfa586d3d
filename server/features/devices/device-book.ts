import { performance } from 'node:perf_hooks'
import type { Knex } from 'knex'
import type { Clock } from '#shared/domain/clock.ts'
import { isDatabaseAway } from '../../db/database-away.ts'
import type { DeviceIdentity } from '../../http/mount.ts'
import type { ChannelSource, KnownChannel, KnownChannels } from '../../ingest/known-device.ts'
import { deviceRepository, type Credentials } from './repository.ts'
import { isHashOf } from './secret.ts'
import { sensorsOfChannels } from './sensor-rows.ts'

/** Devices in memory: who may sign in, and which channels each has. */
export interface DeviceBook extends ChannelSource {
  /** The device that a user name and secret belong to; undefined when they do not. */
  signIn: (username: string, secret: string) => Promise<DeviceIdentity | undefined>
  /** Reads all devices, so that they can sign in and send even when the database goes away. */
  warm: () => Promise<void>
  /** Forgets what may have changed: of one device, or of all. */
  invalidate: (device?: { deviceId: number; username: string }) => void
}

/** After this, in ms, an entry is read anew: another process may have changed it. */
const freshMs = 60_000
/** The database is not asked for the same again before, in ms. */
const restMs = 1000

interface Entry<T> {
  value: T
  readAt: number
}

/** Keeps devices in memory, so that a storm of reconnecting devices does not become one of queries. */
export function createDeviceBook({ db, clock }: { db: Knex; clock: Clock }): DeviceBook {
  const repository = deviceRepository(db)
  const byUsername = new Map<string, Entry<Credentials | undefined>>()
  const channels = new Map<number, Entry<KnownChannels>>()
  const reading = new Map<string, Promise<unknown>>()

  /** One query at a time for the same thing; all who ask meanwhile get its answer. */
  const once = async <T>(key: string, read: () => Promise<T>, known: () => T): Promise<T> => {
    const underWay = reading.get(key)
    if (underWay) {
      await underWay
      return known()
    }
    const promise = read().finally(() => reading.delete(key))
    reading.set(key, promise)
    return promise
  }

  const readCredentials = (username: string) =>
    once(
      `user ${username}`,
      async () => {
        const [value] = await repository.credentials(username)
        // Names that nobody has would fill the memory.
        if (byUsername.size > 10_000) byUsername.clear()
        byUsername.set(username, { value, readAt: performance.now() })
        return value
      },
      () => byUsername.get(username)?.value,
    )

  const readChannels = (deviceIds: readonly number[] | undefined) => async () => {
    const numbers = await repository.channelNumbers(deviceIds)
    const sensors = await sensorsOfChannels(
      db,
      numbers.map(({ id }) => id),
    )
    const readAt = performance.now()
    const found = new Map<number, Map<number, KnownChannel>>()
    for (const id of deviceIds ?? []) found.set(id, new Map())
    for (const { id, deviceId, number } of numbers) {
      const ofDevice = found.get(deviceId) ?? new Map<number, KnownChannel>()
      ofDevice.set(number, { id, sensors: sensors.get(id) ?? [] })
      found.set(deviceId, ofDevice)
    }
    for (const [deviceId, value] of found) channels.set(deviceId, { value, readAt })
    return found
  }

  const loadChannels = (deviceId: number): Promise<KnownChannels> =>
    once(
      `channels ${deviceId}`,
      async () => (await readChannels([deviceId])()).get(deviceId) ?? new Map(),
      () => channels.get(deviceId)?.value ?? new Map(),
    )

  const matches = (credentials: Credentials | undefined, secret: string) =>
    credentials?.secrets.some(
      ({ hash, expiresAtMs }) =>
        (expiresAtMs === undefined || expiresAtMs > clock.now()) && isHashOf(hash, secret),
    )
      ? credentials.device
      : undefined

  return {
    signIn: async (username, secret) => {
      const entry = byUsername.get(username)
      const age = entry ? performance.now() - entry.readAt : Infinity
      const device = matches(entry?.value, secret)
      // A secret that does not fit may be newer than what is known here.
      if (entry && (device ? age < freshMs : age < restMs)) return device
      try {
        return matches(await readCredentials(username), secret)
      } catch (error) {
        if (device && isDatabaseAway(error)) return device
        throw error
      }
    },

    known: (deviceId) => {
      const entry = channels.get(deviceId)
      if (entry && performance.now() - entry.readAt > freshMs) {
        entry.readAt = performance.now()
        // What is known goes on being used; a failure shows in the next query that matters.
        loadChannels(deviceId).catch(() => undefined)
      }
      return entry?.value
    },

    load: async (deviceId) => {
      const entry = channels.get(deviceId)
      if (entry && performance.now() - entry.readAt < restMs) return entry.value
      try {
        return await loadChannels(deviceId)
      } catch (error) {
        if (entry && isDatabaseAway(error)) return entry.value
        throw error
      }
    },

    warm: async () => {
      const readAt = performance.now()
      for (const value of await repository.credentials())
        byUsername.set(value.device.username, { value, readAt })
      await readChannels(undefined)()
    },

    invalidate: (device) => {
      if (device) {
        byUsername.delete(device.username)
        channels.delete(device.deviceId)
      } else {
        byUsername.clear()
        channels.clear()
      }
    },
  }
}
