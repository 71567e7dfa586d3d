import { z } from 'zod'
import { Id, Slug } from './common.ts'
import { Cooker } from './cooker.ts'
import { Device } from './device.ts'
import { CookEvent } from './event.ts'
import { LatestForecast } from './forecast.ts'
import { Piece } from './piece.ts'
import { Service, Tonight } from './site.ts'

/** Path of the WebSocket. */
export const livePath = '/live'

/** Close codes of our own (RFC 6455 leaves 4000–4999 to applications). */
export const closeCodes = { notSignedIn: 4401, tooSlow: 4408 } as const

/** What a client says. The first message is `hello`, within five seconds. */
export const ClientMessage = z.discriminatedUnion('type', [
  z.strictObject({ type: z.literal('hello'), ticket: z.string().max(2000) }),
  z.strictObject({ type: z.literal('subscribe'), site: Slug }),
  z.strictObject({ type: z.literal('unsubscribe'), site: Slug }),
  /** Asked for when a sequence number was missed. */
  z.strictObject({ type: z.literal('snapshot'), site: Slug }),
  /** Whether anybody can see the page. Hidden it gets nothing but what changes its title; seen again, a snapshot. */
  z.strictObject({ type: z.literal('attention'), visible: z.boolean() }),
])
export type ClientMessage = z.infer<typeof ClientMessage>

/** A reading on the wire: channel, milliseconds since 1970 UTC, corrected °C. */
export const ReadingTuple = z.tuple([Id, z.number(), z.number()])
export type ReadingTuple = z.infer<typeof ReadingTuple>

/** What changed in a room since the frame before; whole objects replace those with the same id. */
export const LiveChanges = z.object({
  readings: z.array(ReadingTuple).optional(),
  cookers: z.array(Cooker).optional(),
  pieces: z.array(Piece).optional(),
  devices: z.array(Device).optional(),
  services: z.array(Service).optional(),
  forecasts: z.array(LatestForecast).optional(),
  events: z.array(CookEvent).optional(),
})
export type LiveChanges = z.infer<typeof LiveChanges>

/** Where a frame stands: the epoch names the server process, the sequence counts its frames of one room. */
const Place = { site: Slug, epoch: z.string(), seq: z.int().nonnegative() }

export const ServerMessage = z.discriminatedUnion('type', [
  z.object({ type: z.literal('welcome'), epoch: z.string() }),
  z.object({ type: z.literal('snapshot'), ...Place, tonight: Tonight }),
  z.object({ type: z.literal('delta'), ...Place, sentAt: z.number(), changes: LiveChanges }),
  /** To a hidden page: what is to be done next, in ms since 1970 UTC. */
  z.object({
    type: z.literal('title'),
    site: Slug,
    next: z
      .object({ kind: z.enum(['wrap', 'pull', 'rest', 'hold']), subject: z.string(), at: z.number() })
      .nullable(),
  }),
  z.object({ type: z.literal('refused'), site: Slug.optional(), reason: z.string() }),
])
export type ServerMessage = z.infer<typeof ServerMessage>
