import { createHash } from 'node:crypto'
import type { Knex } from 'knex'
import { z } from 'zod'
import { readingsTopic } from '#shared/contract/mqtt.ts'
import type { LoadDevice } from './raw-publisher.ts'

const longAgo = '2020-01-01T00:00:00Z'
export const channelsPerDevice = 6

/** Adds a site with so many boxes of six digital probes. @returns how each signs in and where it publishes */
export async function makeLoadHouse(db: Knex, devices: number): Promise<LoadDevice[]> {
  const slug = 'load-yard'
  const siteId = await insert(db, 'sites', { slug, name: 'Load Yard', time_zone: 'UTC', elevation_m: 0 })
  const made: LoadDevice[] = []
  for (let index = 0; index < devices; index++) {
    const device = `box-${index}`
    const username = `${slug}.${device}`
    const secret = `secret-of-${device}`
    const id = await insert(db, 'devices', {
      site_id: siteId,
      slug: device,
      name: `Box ${index}`,
      username,
      created_at: longAgo,
    })
    await db('device_secrets').insert({
      device_id: id,
      secret_hash: createHash('sha256').update(secret).digest(),
      created_at: longAgo,
    })
    for (let number = 1; number <= channelsPerDevice; number++) {
      const channelId = await insert(db, 'channels', { device_id: id, number })
      await db('sensors').insert({ channel_id: channelId, kind: 'digital', during: `[${longAgo},)` })
    }
    made.push({ username, secret, topic: readingsTopic(slug, device) })
  }
  return made
}

const Inserted = z.tuple([z.object({ id: z.int() })])

async function insert(db: Knex, table: string, row: Record<string, unknown>): Promise<number> {
  const [{ id }] = Inserted.parse(await db(table).insert(row).returning('id'))
  return id
}
