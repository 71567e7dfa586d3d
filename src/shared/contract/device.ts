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
}
