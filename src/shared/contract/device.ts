import { z } from 'zod'
import { Id, Instant, NoBody, Nothing, PageQuery, PathId, SiteParams, Slug, pageOf } from './common.ts'
import { atSite, endpoint } from './endpoint.ts'

export const Channel = z
  .object({
    id: Id,
    number: z.int().positive(),
    /** The unit its sensor sends: `Cel`, `Ohm` or `V`. */
    unit: z.enum(['Cel', 'Ohm', 'V']),
    /** Where the probe is now. */
    placedIn: z.object({ kind: z.enum(['piece', 'cooker']), id: Id, name: z.string() }).nullable(),
  })
  .meta({ id: 'Channel' })
export type Channel = z.infer<typeof Channel>

export const deviceConnections = ['never', 'online', 'offline'] as const

export const Device = z
  .object({
    id: Id,
    site: Slug,
    slug: Slug,
    name: z.string(),
    /** How often it sends, in seconds; three of these without a word make its data stale. */
    intervalS: z.number().positive(),
    connection: z.enum(deviceConnections),
    lastSeenAt: Instant.nullable(),
    batteryPercent: z.number().nullable(),
    signalDbm: z.number().nullable(),
    channels: z.array(Channel),
  })
  .meta({ id: 'Device' })
export type Device = z.infer<typeof Device>

/** A new device's credentials: the secret is shown this once. */
export const NewDevice = z
  .object({
    deviceId: Id,
    username: z.string(),
    secret: z.string(),
    topic: z.string(),
    channels: z.array(z.object({ id: Id, number: z.int().positive() })),
  })
  .meta({ id: 'NewDevice' })
export type NewDevice = z.infer<typeof NewDevice>

/** Why something a device sent was not stored. */
export const rejectionReasons = [
  'not-json',
  'not-senml',
  'unknown-channel',
  'unknown-unit',
  'wrong-unit',
  'not-a-number',
  'value-out-of-range',
  'time-in-future',
  'time-too-old',
  'conflict',
  'unsupported-field',
  'foreign-topic',
  'too-large',
] as const
export const RejectionReason = z.enum(rejectionReasons)
export type RejectionReason = z.infer<typeof RejectionReason>

export const RejectedMessage = z
  .object({
    id: Id,
    deviceId: Id.nullable(),
    receivedAt: Instant,
    topic: z.string(),
    reason: RejectionReason,
    /** In words, with the value that was wrong. */
    detail: z.string(),
    /** The beginning of what was sent. */
    payload: z.string(),
  })
  .meta({ id: 'RejectedMessage' })
export type RejectedMessage = z.infer<typeof RejectedMessage>

/** How a device reaches the server. */
export const deviceTransports = ['mqtt', 'websocket', 'http'] as const
export type DeviceTransport = (typeof deviceTransports)[number]

/**
 * What went wrong with a device: at the door (`wrong-secret`, `ended-secret`: one that was good before), with what it
 * sent (`refused-message`, `foreign-topic`, `too-large`, `malformed`), or with its connection.
 */
export const deviceErrorKinds = [
  'wrong-secret',
  'ended-secret',
  'refused-message',
  'foreign-topic',
  'too-large',
  'malformed',
  'lost',
  'silent',
  'not-reading',
  'taken-over',
  'too-many-connections',
  'secret-ended',
] as const
export const DeviceErrorKind = z.enum(deviceErrorKinds)
export type DeviceErrorKind = z.infer<typeof DeviceErrorKind>

export const DeviceError = z
  .object({
    at: Instant,
    kind: DeviceErrorKind,
    /** Of a refused message. */
    reason: RejectionReason.nullable(),
    /** In words. */
    detail: z.string(),
    /** Where it came from; told to those only who may manage devices. */
    remoteAddress: z.string().nullable(),
  })
  .meta({ id: 'DeviceError' })
export type DeviceError = z.infer<typeof DeviceError>

/** How a device is connected, or was last. */
export const DeviceStatus = z
  .object({
    deviceId: Id,
    connection: z.enum(deviceConnections),
    /** Null until it came for the first time. */
    transport: z.enum(deviceTransports).nullable(),
    /** When this connection began; over HTTP, which has none, when the counting began. */
    since: Instant.nullable(),
    /** When it ended; null while it lasts. */
    until: Instant.nullable(),
    clientId: z.string().nullable(),
    /** Told to those only who may manage devices. */
    remoteAddress: z.string().nullable(),
    /** Messages, and the readings in them that were stored or refused, since then. */
    messages: z.int(),
    readings: z.int(),
    rejected: z.int(),
    lastSeenAt: Instant.nullable(),
    lastError: DeviceError.nullable(),
  })
  .meta({ id: 'DeviceStatus' })
export type DeviceStatus = z.infer<typeof DeviceStatus>

/** What is known of a device's secret; never the secret. */
export const DeviceSecret = z
  .object({
    id: Id,
    createdAt: Instant,
    /** Null for the newest, which has no end. */
    expiresAt: Instant.nullable(),
    firstUsedAt: Instant.nullable(),
    lastUsedAt: Instant.nullable(),
    /** Whether a connection that is open was made with it. */
    inUse: z.boolean(),
  })
  .meta({ id: 'DeviceSecret' })
export type DeviceSecret = z.infer<typeof DeviceSecret>

/** A device's new secret, shown this once. */
export const NewDeviceSecret = z
  .object({
    deviceId: Id,
    secretId: Id,
    username: z.string(),
    secret: z.string(),
    /** When the one before ends; null when there was none that was good still. */
    oldSecretEndsAt: Instant.nullable(),
  })
  .meta({ id: 'NewDeviceSecret' })
export type NewDeviceSecret = z.infer<typeof NewDeviceSecret>

/** How long the old secret of a device stays good beside a new one, in hours. */
export const secretOverlapHours = { usual: 24, most: 30 * 24 } as const

const DeviceParams = z.object({ deviceId: PathId })
const tag = 'Devices'

export const deviceEndpoints = {
  list: endpoint({
    method: 'get',
    path: '/api/sites/:site/devices',
    tag,
    summary: 'The devices of a site with their channels and when each was last heard',
    access: atSite('site.view'),
    params: SiteParams,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(Device) }),
    status: 200,
  }),
  add: endpoint({
    method: 'post',
    path: '/api/sites/:site/devices',
    tag,
    summary: 'Add a device; its secret is in this answer and nowhere else',
    access: atSite('device.manage'),
    params: SiteParams,
    query: Nothing,
    body: z.strictObject({
      name: z.string().trim().min(1, 'Give the device a name.').max(40),
      channels: z.int().min(1).max(64),
    }),
    response: NewDevice,
    status: 201,
  }),
  rejected: endpoint({
    method: 'get',
    path: '/api/sites/:site/rejected',
    tag,
    summary: 'What devices of this site sent that could not be stored, and why, newest first',
    access: atSite('device.view'),
    params: SiteParams,
    query: PageQuery.extend({ deviceId: PathId.optional() }),
    body: NoBody,
    response: pageOf(RejectedMessage),
    status: 200,
  }),
  statuses: endpoint({
    method: 'get',
    path: '/api/sites/:site/device-status',
    tag,
    summary: 'How each device of a site is connected, what came since, and what went wrong last',
    access: atSite('device.view'),
    params: SiteParams,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(DeviceStatus) }),
    status: 200,
  }),
  status: endpoint({
    method: 'get',
    path: '/api/devices/:deviceId/status',
    tag,
    summary: 'How a device is connected, what came since, and what went wrong last',
    access: atSite('device.view', 'deviceId'),
    params: DeviceParams,
    query: Nothing,
    body: NoBody,
    response: DeviceStatus,
    status: 200,
  }),
  secrets: endpoint({
    method: 'get',
    path: '/api/devices/:deviceId/secrets',
    tag,
    summary:
      'The secrets that let a device in, newest first: since when, until when, when used; never the secret',
    access: atSite('device.manage', 'deviceId'),
    params: DeviceParams,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(DeviceSecret) }),
    status: 200,
  }),
  renewSecret: endpoint({
    method: 'post',
    path: '/api/devices/:deviceId/secrets',
    tag,
    summary: 'Make a new secret, in this answer and nowhere else; the old one stays good for the overlap',
    access: atSite('device.manage', 'deviceId'),
    params: DeviceParams,
    query: Nothing,
    body: z.strictObject({
      /** 0: the old one ends at once. */
      overlapHours: z.number().min(0).max(secretOverlapHours.most),
    }),
    response: NewDeviceSecret,
    status: 201,
  }),
  endSecret: endpoint({
    method: 'delete',
    path: '/api/devices/:deviceId/secrets/:secretId',
    tag,
    summary: 'End an old secret at once; a connection that was made with it is closed',
    access: atSite('device.manage', 'deviceId'),
    params: DeviceParams.extend({ secretId: PathId }),
    query: Nothing,
    body: NoBody,
    response: NoBody,
    status: 204,
  }),
}
