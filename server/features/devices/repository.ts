import type { Knex } from 'knex'
import { z } from 'zod'
import {
  deviceConnections,
  RejectionReason,
  type Device,
  type RejectedMessage,
} from '#shared/contract/device.ts'
import { sensorKinds, unitOfSensor } from '#shared/domain/sensor.ts'
import { numberArray } from '../../db/number-array.ts'
import type { DeviceIdentity } from '../../http/mount.ts'

/** A device with the hashes of the secrets that let it in. */
export interface Credentials {
  device: DeviceIdentity
  secrets: { id: number; hash: Buffer; expiresAtMs: number | undefined }[]
}

/** What changed of a device; undefined fields did not. */
export interface DeviceState {
  deviceId: number
  lastSeenAtMs: number | undefined
  batteryPercent: number | undefined
  signalDbm: number | undefined
  connection: 'online' | 'offline' | undefined
}

const IdentityRow = z.object({
  deviceId: z.int(),
  username: z.string(),
  deviceSlug: z.string(),
  siteId: z.int(),
  siteSlug: z.string(),
  secretId: z.int().nullable(),
  hash: z.instanceof(Buffer).nullable(),
  expiresAt: z.date().nullable(),
})
const DeviceRow = z.object({
  id: z.int(),
  site: z.string(),
  slug: z.string(),
  name: z.string(),
  interval_s: z.number(),
  connection: z.enum(deviceConnections),
  last_seen_at: z.date().nullable(),
  battery_percent: z.number().nullable(),
  signal_dbm: z.number().nullable(),
})
const ChannelRow = z.object({
  id: z.int(),
  device_id: z.int(),
  number: z.int(),
  kind: z.enum(sensorKinds).nullable(),
  piece_id: z.int().nullable(),
  label: z.string().nullable(),
  cooker_id: z.int().nullable(),
  cooker_name: z.string().nullable(),
})
const RejectedRow = z.object({
  id: z.int(),
  device_id: z.int().nullable(),
  received_at: z.date(),
  topic: z.string(),
  reason: RejectionReason,
  detail: z.string(),
  payload: z.string(),
})
const Ids = z.array(z.object({ id: z.int() }))

export type DeviceRepository = ReturnType<typeof deviceRepository>

/** Devices, their channels, secrets and state. */
export function deviceRepository(db: Knex) {
  const devicesWhere = async (
    condition: { siteId: number } | { siteSlug: string } | { ids: readonly number[] },
  ): Promise<Device[]> => {
    const query = db('devices as d')
      .join('sites as s', 's.id', 'd.site_id')
      .select(
        'd.id',
        'd.slug',
        'd.name',
        'interval_s',
        'connection',
        'last_seen_at',
        'battery_percent',
        'signal_dbm',
        { site: 's.slug' },
      )
      .orderBy(['d.name', 'd.id'])
    if ('ids' in condition) void query.whereIn('d.id', condition.ids)
    else if ('siteSlug' in condition) void query.where('s.slug', condition.siteSlug)
    else void query.where('d.site_id', condition.siteId)
    const rows: unknown = await query
    const devices = z.array(DeviceRow).parse(rows)
    const channels = await channelsOf(devices.map(({ id }) => id))
    return devices.map((device) => ({
      id: device.id,
      site: device.site,
      slug: device.slug,
      name: device.name,
      intervalS: device.interval_s,
      connection: device.connection,
      lastSeenAt: device.last_seen_at?.toISOString() ?? null,
      batteryPercent: device.battery_percent,
      signalDbm: device.signal_dbm,
      channels: channels.filter(({ device_id }) => device_id === device.id).map(channelOf),
    }))
  }

  const channelsOf = async (deviceIds: readonly number[]) => {
    const found: unknown = await db.raw(
      `select c.id, c.device_id, c.number, pp.piece_id, p.label, pp.cooker_id, k.name as cooker_name,
         (select kind from sensors where channel_id = c.id order by lower(during) desc limit 1) as kind
       from channels c
       left join probe_placements pp on pp.channel_id = c.id and upper_inf(pp.during)
       left join pieces p on p.id = pp.piece_id
       left join cookers k on k.id = pp.cooker_id
       where c.device_id = any(?) order by c.device_id, c.number`,
      [[...deviceIds]],
    )
    return z.object({ rows: z.array(ChannelRow) }).parse(found).rows
  }

  return {
    ofSite: (siteId: number): Promise<Device[]> => devicesWhere({ siteId }),

    ofSiteNamed: (siteSlug: string): Promise<Device[]> => devicesWhere({ siteSlug }),

    withIds: (ids: readonly number[]): Promise<Device[]> => devicesWhere({ ids }),

    /** Of some user names, or of every device. */
    async credentials(usernames?: readonly string[]): Promise<Credentials[]> {
      const query = db('devices as d')
        .join('sites as s', 's.id', 'd.site_id')
        .leftJoin('device_secrets as secret', 'secret.device_id', 'd.id')
        .select('d.username', {
          deviceId: 'd.id',
          deviceSlug: 'd.slug',
          siteId: 's.id',
          siteSlug: 's.slug',
          secretId: 'secret.id',
          hash: 'secret.secret_hash',
          expiresAt: 'secret.expires_at',
        })
      const rows: unknown = await (usernames ? query.whereIn('d.username', usernames) : query)
      const byId = new Map<number, Credentials>()
      for (const { secretId, hash, expiresAt, ...device } of z.array(IdentityRow).parse(rows)) {
        const credentials = byId.get(device.deviceId) ?? { device, secrets: [] }
        if (hash && secretId !== null) {
          credentials.secrets.push({ id: secretId, hash, expiresAtMs: expiresAt?.getTime() })
        }
        byId.set(device.deviceId, credentials)
      }
      return [...byId.values()]
    },

    /** Channel numbers and ids of some devices, or of all. */
    async channelNumbers(
      deviceIds?: readonly number[],
    ): Promise<{ id: number; deviceId: number; number: number }[]> {
      const query = db('channels')
        .select('id', 'number', { deviceId: 'device_id' })
        .orderBy(['device_id', 'number'])
      const rows: unknown = await (deviceIds ? query.whereIn('device_id', deviceIds) : query)
      return z.array(z.object({ id: z.int(), deviceId: z.int(), number: z.int() })).parse(rows)
    },

    /** Lets others who would add to a site wait until the transaction ends. */
    async holdSite(siteId: number): Promise<void> {
      await db('sites').where({ id: siteId }).forNoKeyUpdate().select('id')
    },

    /** Which of these slugs a site has already, among those that begin like this. */
    async slugsLike(siteId: number, slug: string): Promise<string[]> {
      const rows: unknown = await db('devices')
        .where('site_id', siteId)
        .whereLike('slug', `${slug}%`)
        .select('slug')
      return z
        .array(z.object({ slug: z.string() }))
        .parse(rows)
        .map((row) => row.slug)
    },

    async add(device: {
      siteId: number
      slug: string
      name: string
      username: string
      secretHash: Buffer
      channels: number
      createdAt: Date
    }): Promise<{ deviceId: number; channels: { id: number; number: number }[] }> {
      const added: unknown = await db('devices')
        .insert({
          site_id: device.siteId,
          slug: device.slug,
          name: device.name,
          username: device.username,
          created_at: device.createdAt,
        })
        .returning('id')
      const deviceId = Ids.parse(added)[0]?.id ?? NaN
      await db('device_secrets').insert({
        device_id: deviceId,
        secret_hash: device.secretHash,
        created_at: device.createdAt,
      })
      const numbers = Array.from({ length: device.channels }, (_, index) => index + 1)
      const rows: unknown = await db('channels')
        .insert(numbers.map((number) => ({ device_id: deviceId, number })))
        .returning(['id', 'number'])
      const channels = z.array(z.object({ id: z.int(), number: z.int() })).parse(rows)
      await db('sensors').insert(
        channels.map(({ id }) => ({ channel_id: id, kind: 'digital', during: '[-infinity,)' })),
      )
      return { deviceId, channels: channels.sort((a, b) => a.number - b.number) }
    },

    /** A page of what a site's devices sent in vain, from the newest back; `before` is an id. */
    async rejected(
      siteId: number,
      page: { deviceId?: number | undefined; before?: number | undefined; limit: number },
    ): Promise<RejectedMessage[]> {
      const query = db('rejected_messages as r')
        .join('devices as d', 'd.id', 'r.device_id')
        .where('d.site_id', siteId)
        .select('r.id', 'device_id', 'received_at', 'topic', 'reason', 'detail', 'payload')
        .orderBy('r.id', 'desc')
        .limit(page.limit)
      if (page.deviceId !== undefined) void query.where('r.device_id', page.deviceId)
      if (page.before !== undefined) void query.where('r.id', '<', page.before)
      const rows: unknown = await query
      return z
        .array(RejectedRow)
        .parse(rows)
        .map(({ id, device_id, received_at, ...row }) => ({
          id,
          deviceId: device_id,
          receivedAt: received_at.toISOString(),
          ...row,
        }))
    },

    /** Writes what changed of many devices at once. */
    async saveStates(states: readonly DeviceState[]): Promise<void> {
      await db.raw(
        `update devices d set
           last_seen_at = greatest(d.last_seen_at, to_timestamp(s.seen_ms / 1000.0)),
           battery_percent = coalesce(s.battery, d.battery_percent),
           signal_dbm = coalesce(s.signal, d.signal_dbm),
           connection = coalesce(s.connection, d.connection)
         from unnest(?::int[], ?::float8[], ?::float8[], ?::float8[], ?::text[])
           as s (id, seen_ms, battery, signal, connection)
         where d.id = s.id`,
        [
          numberArray(states.map(({ deviceId }) => deviceId)),
          numberArray(states.map(({ lastSeenAtMs }) => lastSeenAtMs)),
          numberArray(states.map(({ batteryPercent }) => batteryPercent)),
          numberArray(states.map(({ signalDbm }) => signalDbm)),
          `{${states.map(({ connection }) => connection ?? 'null').join(',')}}`,
        ],
      )
    },

    /** Nobody is connected to a server that has just started. */
    async markAllOffline(): Promise<void> {
      await db('devices').where({ connection: 'online' }).update({ connection: 'offline' })
    },
  }
}

function channelOf(row: z.infer<typeof ChannelRow>): Device['channels'][number] {
  return {
    id: row.id,
    number: row.number,
    unit: unitOfSensor(row.kind ?? 'digital'),
    placedIn:
      row.piece_id !== null
        ? { kind: 'piece', id: row.piece_id, name: row.label ?? '' }
        : row.cooker_id !== null
          ? { kind: 'cooker', id: row.cooker_id, name: row.cooker_name ?? '' }
          : null,
  }
}
