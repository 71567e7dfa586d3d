import type { Knex } from 'knex'
import type { Device, DeviceStatus, NewDevice, RejectedMessage } from '#shared/contract/device.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { readingsTopic } from '#shared/contract/mqtt.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { DeviceIdentity } from '../../http/mount.ts'
import { badRequest, notFound } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import type { DeviceBook } from './device-book.ts'
import type { DeviceConnections, DeviceOrigin } from './device-connections.ts'
import { deviceRepository, type DeviceRepository } from './repository.ts'
import { hashOfSecret, newSecret } from './secret.ts'
import { createDeviceSecrets } from './secrets.ts'
import { sensorsOfChannels } from './sensor-rows.ts'

export interface DeviceDeps {
  db: Knex
  clock: Clock
  book: Pick<DeviceBook, 'check' | 'invalidate'>
  /** Without it nobody connects here: a command's process. */
  connections?: DeviceConnections | undefined
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
}

export type DeviceService = ReturnType<typeof createDeviceService>

export function createDeviceService({ db, clock, book, connections, publish }: DeviceDeps) {
  const repository = deviceRepository(db)

  const statusesOf = (devices: readonly Device[], options: { withAddresses: boolean }) =>
    connections?.statuses(devices, options) ?? Promise.resolve([])

  return {
    /**
     * Adds a device with channels 1 to `channels`, a digital sensor on each. Its secret is told this once.
     * @param by who does it; nobody when a command on the machine does
     */
    async add(
      { site, userId }: { site: { id: number; slug: string }; userId?: number | undefined },
      { name, channels }: { name: string; channels: number },
    ): Promise<NewDevice> {
      const secret = newSecret()
      const added = await db.transaction(async (trx) => {
        const devices = deviceRepository(trx)
        const slug = await freeSlug(devices, site.id, name)
        const username = `${site.slug}.${slug}`
        const device = await devices.add({
          siteId: site.id,
          slug,
          name,
          username,
          secretHash: hashOfSecret(secret),
          channels,
          createdAt: new Date(clock.now()),
        })
        await recordAudit(trx, {
          at: clock.now(),
          userId,
          siteId: site.id,
          action: 'device.add',
          subject: `device ${device.deviceId}`,
          data: { name, username, channels },
        })
        return { ...device, slug, username }
      })
      book.invalidate(added)
      publish(site.slug, { devices: await repository.withIds([added.deviceId]) })
      return {
        deviceId: added.deviceId,
        username: added.username,
        secret,
        topic: readingsTopic(site.slug, added.slug),
        channels: added.channels,
      }
    },

    listOfSite: (siteId: number): Promise<Device[]> => repository.ofSite(siteId),

    /** How each device of a site is connected. */
    async statuses(siteId: number, options: { withAddresses: boolean }): Promise<DeviceStatus[]> {
      return statusesOf(await repository.ofSite(siteId), options)
    },

    /** @throws HttpProblem 404 when there is no such device */
    async status(deviceId: number, options: { withAddresses: boolean }): Promise<DeviceStatus> {
      const [status] = await statusesOf(await repository.withIds([deviceId]), options)
      if (!status) throw notFound()
      return status
    },

    /** Which secrets let a device in, a new one, and the end of an old one. */
    secrets: createDeviceSecrets({ db, clock, book, connections }),

    /** The device that a user name and secret belong to; undefined when they do not, which is noted on the device. */
    signIn: async (
      username: string,
      secret: string,
      origin: DeviceOrigin,
    ): Promise<(DeviceIdentity & { secretId: number }) | undefined> => {
      const checked = await book.check(username, secret)
      if (checked.kind === 'unknown') return undefined
      if (checked.kind !== 'in') {
        const { transport, remoteAddress } = origin
        const detail = `user name ${username}, by ${transport}`
        connections?.trouble(checked.deviceId, { kind: checked.kind, detail, remoteAddress })
        return undefined
      }
      connections?.signedIn(checked.device, origin)
      return checked.device
    },

    /** The sensors that have hung on channels: what their values mean at each time. */
    sensorsOf: (channelIds: readonly number[]) => sensorsOfChannels(db, channelIds),

    /** To call once at start, before any device connects. */
    async markAllOffline(): Promise<void> {
      await repository.markAllOffline()
      await connections?.endAll()
    },

    /** What the site's devices sent and was not taken, newest first. */
    async rejected(
      siteId: number,
      {
        deviceId,
        cursor,
        limit,
      }: { deviceId?: number | undefined; cursor?: string | undefined; limit: number },
    ): Promise<{ items: RejectedMessage[]; nextCursor: string | null }> {
      const before = cursor === undefined ? undefined : idOf(cursor)
      const found = await repository.rejected(siteId, { deviceId, before, limit: limit + 1 })
      const items = found.slice(0, limit)
      return { items, nextCursor: found.length > limit ? String(items.at(-1)?.id) : null }
    },
  }
}

/** A slug that no other device of the site has; two that are added at once are told apart. */
async function freeSlug(devices: DeviceRepository, siteId: number, name: string): Promise<string> {
  const slug = slugOf(name)
  await devices.holdSite(siteId)
  const taken = new Set(await devices.slugsLike(siteId, slug))
  if (!taken.has(slug)) return slug
  let number = 2
  while (taken.has(`${slug}-${number}`)) number++
  return `${slug}-${number}`
}

function idOf(cursor: string): number {
  const id = Number(cursor)
  if (!Number.isSafeInteger(id)) throw badRequest('That cursor is not one of this list.')
  return id
}

/** A name as part of a topic: small letters, digits and hyphens. */
function slugOf(name: string): string {
  const slug = name
    .normalize('NFKD')
    .replace(/\p{M}/gu, '')
    .toLowerCase()
    .replace(/[^a-z0-9]+/g, '-')
    .slice(0, 32)
    .replace(/^-+|-+$/g, '')
  return slug === '' ? 'device' : slug
}
