import { createHash } from 'node:crypto'
import type { Knex } from 'knex'
import { z } from 'zod'
import { readingsTopic } from '#shared/contract/mqtt.ts'
import type { BoxPlan } from '../devices/plan.ts'

/** A device as it stands in the database. */
export interface KnownDevice {
  username: string
  secret: string
  topic: string
  statusTopic: string
  /** By number, from 1. */
  channelIds: number[]
}

export const channelsPerDevice = 4

const longAgo = '2020-01-01T00:00:00Z'
const Devices = z.array(z.object({ id: z.int(), slug: z.string() }))
const Channels = z.array(z.object({ id: z.int(), device_id: z.int(), number: z.int() }))

/** Adds devices to a site, with four channels each and a digital sensor on every one. */
export async function addDevices(
  db: Knex,
  site: { id: number; slug: string },
  count: number,
): Promise<KnownDevice[]> {
  if (count === 0) return []
  const slugs = Array.from({ length: count }, (_, index) => `box-${index + 1}`)
  const usernameOf = (slug: string) => `${site.slug}.${slug}`
  const made: unknown = await db('devices')
    .insert(
      slugs.map((slug) => ({
        site_id: site.id,
        slug,
        name: slug,
        username: usernameOf(slug),
        created_at: longAgo,
      })),
    )
    .returning(['id', 'slug'])
  const devices = Devices.parse(made)
  await db('device_secrets').insert(
    devices.map(({ id, slug }) => ({
      device_id: id,
      secret_hash: createHash('sha256').update(secretOf(slug)).digest(),
      created_at: longAgo,
    })),
  )
  const rows = devices.flatMap(({ id }) =>
    Array.from({ length: channelsPerDevice }, (_, index) => ({ device_id: id, number: index + 1 })),
  )
  const inserted: unknown = await db('channels').insert(rows).returning(['id', 'device_id', 'number'])
  const channels = Channels.parse(inserted)
  await db('sensors').insert(
    channels.map(({ id }) => ({ channel_id: id, kind: 'digital', during: `[${longAgo},)` })),
  )
  const idsOf = new Map<number, number[]>()
  for (const channel of channels.sort((a, b) => a.number - b.number)) {
    const ids = idsOf.get(channel.device_id) ?? []
    ids.push(channel.id)
    idsOf.set(channel.device_id, ids)
  }
  return devices.map(({ id, slug }) => ({
    username: usernameOf(slug),
    secret: secretOf(slug),
    topic: readingsTopic(site.slug, slug),
    statusTopic: readingsTopic(site.slug, slug).replace(/readings$/, 'status'),
    channelIds: idsOf.get(id) ?? [],
  }))
}

function secretOf(slug: string): string {
  return `secret of ${slug}`
}

/**
 * Plans for boxes that sample live, all of their channels a message. They take turns within a period, so that the
 * load is even.
 */
export function livePlans(
  devices: readonly KnownDevice[],
  {
    nowMs,
    periodMs,
    window = 20,
    keepAliveS = 10,
  }: {
    nowMs: number
    periodMs: number
    window?: number
    keepAliveS?: number
  },
): BoxPlan[] {
  return devices.map((device, index) => ({
    ...whoIs(device),
    startMs: Math.floor(nowMs) + Math.floor((index * periodMs) / devices.length),
    periodMs,
    samplesPerMessage: 1,
    samples: null,
    window,
    keepAliveS,
    reconnectMs: 200,
  }))
}

/** Plans for boxes that come with what they kept while they could not send: one sample every 5 s. */
export function storedPlans(
  devices: readonly KnownDevice[],
  { nowMs, hours }: { nowMs: number; hours: number },
): BoxPlan[] {
  const periodMs = 5_000
  const samples = (hours * 3_600_000) / periodMs
  return devices.map((device) => ({
    ...whoIs(device),
    startMs: Math.floor(nowMs) - samples * periodMs,
    periodMs,
    // With four channels about 43 kB.
    samplesPerMessage: 360,
    samples,
    window: 20,
    keepAliveS: 30,
    reconnectMs: 1_000,
  }))
}

function whoIs({ username, secret, topic, channelIds }: KnownDevice) {
  return { username, secret, topic, clientId: 'box', channels: channelIds.length }
}
