import { performance } from 'node:perf_hooks'
import type { Knex } from 'knex'
import type { Clock } from '#shared/domain/clock.ts'
import { isDatabaseAway } from '../../db/database-away.ts'
import type { DeviceIdentity } from '../../http/mount.ts'
import type { ChannelSource, KnownChannel, KnownChannels } from '../../ingest/known-device.ts'
import { deviceRepository, type Credentials } from './repository.ts'
import { hashOfSecret, isSameHash } from './secret.ts'
import { sensorsOfChannels } from './sensor-rows.ts'

/** Devices in memory: who may sign in, and which channels each has. */
export interface DeviceBook extends ChannelSource {
  /** The device that a user name and secret belong to, or why they do not. */
  check: (username: string, secret: string) => Promise<Checked>
  /** Reads all devices, so that they can sign in and send even when the database goes away. */
  warm: () => Promise<void>
  /** Forgets what may have changed: of one device, or of all. */
  invalidate: (device?: { deviceId: number; username: string }) => void
}

/** What a user name and a secret are worth together. */
export type Checked =
  | { kind: 'in'; device: DeviceIdentity & { secretId: number } }
  /** The name is a device's. */
  | { kind: 'wrong-secret' | 'ended-secret'; deviceId: number }
  | { kind: 'unknown' }

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

  let asked = new Set<string>()
  let askedTogether: Promise<void> | undefined
  let invalidations = 0

  /** All who sign in within one turn are looked up in one query. */
  const readTogether = async (): Promise<void> => {
    await new Promise((resolve) => setImmediate(resolve))
    const usernames = asked
    asked = new Set()
    askedTogether = undefined
    const before = invalidations
    const found = await repository.credentials([...usernames])
    const byName = new Map(found.map((one) => [one.device.username, one]))
    // Names that nobody has would fill the memory.
    if (byUsername.size > 10_000) byUsername.clear()
    // What was changed while it was read must be read again.
    const readAt = before === invalidations ? performance.now() : -Infinity
    for (const username of usernames) byUsername.set(username, { value: byName.get(username), readAt })
  }

  const readCredentials = (username: string) =>
    once(
      `user ${username}`,
      async () => {
        asked.add(username)
        await (askedTogether ??= readTogether())
        return byUsername.get(username)?.value
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

  const matching = (credentials: Credentials | undefined, given: Buffer): Checked => {
    if (!credentials) return { kind: 'unknown' }
    const { device, secrets } = credentials
    const found = secrets.filter(({ hash }) => isSameHash(hash, given))
    const good = found.find(({ expiresAtMs }) => expiresAtMs === undefined || expiresAtMs > clock.now())
    if (good) return { kind: 'in', device: { ...device, secretId: good.id } }
    return { kind: found.length > 0 ? 'ended-secret' : 'wrong-secret', deviceId: device.deviceId }
  }

  return {
    check: async (username, secret) => {
      const given = hashOfSecret(secret)
      const entry = byUsername.get(username)
      const age = entry ? performance.now() - entry.readAt : Infinity
      const known = matching(entry?.value, given)
      // A secret that does not fit may be newer than what is known here.
      if (entry && (known.kind === 'in' ? age < freshMs : age < restMs)) return known
      try {
        return matching(await readCredentials(username), given)
      } catch (error) {
        if (known.kind === 'in' && isDatabaseAway(error)) return known
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
      invalidations++
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
