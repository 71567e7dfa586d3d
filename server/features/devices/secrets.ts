import type { Knex } from 'knex'
import { secretOverlapHours, type DeviceSecret, type NewDeviceSecret } from '#shared/contract/device.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { conflict, notFound } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import type { DeviceBook } from './device-book.ts'
import type { DeviceConnections } from './device-connections.ts'
import { hashOfSecret, newSecret } from './secret.ts'
import { secretRows } from './secret-rows.ts'

export interface DeviceSecretDeps {
  db: Knex
  clock: Clock
  book: Pick<DeviceBook, 'invalidate'>
  /** Without it nobody is connected here: a command's process. */
  connections?: Pick<DeviceConnections, 'useOf' | 'secretsInUse' | 'endSecrets'> | undefined
}

export type DeviceSecrets = ReturnType<typeof createDeviceSecrets>

/** Each of them is tried at a sign-in; nobody needs more at a time. */
const maxAlive = 5
const hourMs = 3_600_000

/** Changing a device's secret without an hour in which it cannot get in. */
export function createDeviceSecrets({ db, clock, book, connections }: DeviceSecretDeps) {
  return {
    /** Those that let the device in, the newest first. */
    async list(deviceId: number): Promise<DeviceSecret[]> {
      const inUse = connections?.secretsInUse()
      const alive = await secretRows(db).alive(deviceId, clock.now())
      return alive.map(({ id, createdAtMs, expiresAtMs, firstUsedAtMs, lastUsedAtMs }) => {
        const use = connections?.useOf(id)
        return {
          id,
          createdAt: new Date(createdAtMs).toISOString(),
          expiresAt: instant(expiresAtMs),
          firstUsedAt: instant(firstUsedAtMs ?? use?.firstMs ?? null),
          lastUsedAt: instant(use?.lastMs ?? lastUsedAtMs),
          inUse: inUse?.has(id) ?? false,
        }
      })
    },

    /**
     * Makes a new secret; those before it are good for the overlap still. It is told this once.
     * @param by who does it; nobody when a command on the machine does
     * @throws HttpProblem 404 when there is no such device, 409 when too many secrets are good already
     */
    async renew(
      deviceId: number,
      { overlapHours = secretOverlapHours.usual }: { overlapHours?: number | undefined },
      by: { userId?: number | undefined } = {},
    ): Promise<NewDeviceSecret> {
      const secret = newSecret()
      const nowMs = clock.now()
      const endsAtMs = nowMs + overlapHours * hourMs
      const renewed = await db.transaction(async (trx) => {
        const rows = secretRows(trx)
        const device = await rows.hold(deviceId)
        if (!device) throw notFound()
        const before = await rows.alive(deviceId, nowMs)
        if (before.length >= maxAlive && overlapHours > 0) {
          throw conflict(`${maxAlive} secrets of this device are good already. End one of them first.`)
        }
        await rows.end(
          before.map(({ id }) => id),
          endsAtMs,
        )
        const secretId = await rows.add(deviceId, hashOfSecret(secret), nowMs)
        await recordAudit(trx, {
          at: nowMs,
          userId: by.userId,
          siteId: device.siteId,
          action: 'device.secret.renew',
          subject: `device ${deviceId}`,
          data: { secretId, overlapHours, before: before.map(({ id }) => id) },
        })
        return { secretId, before, username: device.username }
      })
      const { secretId, before, username } = renewed
      book.invalidate({ deviceId, username })
      if (overlapHours === 0) connections?.endSecrets(new Set(before.map(({ id }) => id)))
      const newestBefore = before[0]
      const oldEndsAtMs = newestBefore && Math.min(endsAtMs, newestBefore.expiresAtMs ?? Infinity)
      return { deviceId, secretId, username, secret, oldSecretEndsAt: instant(oldEndsAtMs ?? null) }
    },

    /**
     * Ends an old secret at once, and the connections that were made with it.
     * @throws HttpProblem 404 when the device has no such secret that is good, 409 when it is the newest
     */
    async end(deviceId: number, secretId: number, by: { userId: number }): Promise<void> {
      const nowMs = clock.now()
      const username = await db.transaction(async (trx) => {
        const rows = secretRows(trx)
        const device = await rows.hold(deviceId)
        const alive = await rows.alive(deviceId, nowMs)
        if (!device || !alive.some(({ id }) => id === secretId)) throw notFound()
        if (alive[0]?.id === secretId) {
          throw conflict('That is the newest secret. Make a new one, and let this one end at once.')
        }
        await rows.end([secretId], nowMs)
        await recordAudit(trx, {
          at: nowMs,
          userId: by.userId,
          siteId: device.siteId,
          action: 'device.secret.end',
          subject: `device ${deviceId}`,
          data: { secretId },
        })
        return device.username
      })
      book.invalidate({ deviceId, username })
      connections?.endSecrets(new Set([secretId]))
    },
  }
}

function instant(ms: number | null): string | null {
  return ms === null ? null : new Date(ms).toISOString()
}
