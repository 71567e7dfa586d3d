import type { Knex } from 'knex'
import { z } from 'zod'
import type { Cooker } from '#shared/contract/cooker.ts'
import type { Device } from '#shared/contract/device.ts'
import type { LatestForecast } from '#shared/contract/forecast.ts'
import type { Piece } from '#shared/contract/piece.ts'
import type { LatestReading, Service, Site, Tonight } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { notFound } from '../../http/problem.ts'

const hourMs = 3_600_000

/** What the running night is put together from. */
export interface TonightDeps {
  db: Knex
  clock: Clock
  pieces: { open: (siteId: number) => Promise<Piece[]> }
  services: { between: (siteId: number, fromMs: number, toMs: number) => Promise<Service[]> }
  cookers: { listOfSite: (siteId: number) => Promise<Cooker[]> }
  devices: { listOfSite: (siteId: number) => Promise<Device[]> }
  readings: { latestOf: (channelIds: readonly number[]) => Promise<LatestReading[]> }
  forecasts: { latestOf: (pieceIds: readonly number[]) => Promise<LatestForecast[]> }
}

export type TonightReadModel = ReturnType<typeof createTonightReadModel>

/** Everything of a site's running night but the lines: what the wall and a new socket start from. */
export function createTonightReadModel(deps: TonightDeps) {
  const { db, clock, pieces, services, cookers, devices, readings, forecasts } = deps
  return {
    /**
     * The pieces that are not sliced yet, the services from six hours ago to a day and a half ahead, every cooker
     * and device, the newest reading of each channel and the newest forecast of each of those pieces.
     * @throws HttpProblem 404 when there is no such site
     */
    async ofSite(slug: string): Promise<Tonight> {
      const site = await siteBySlug(db, slug)
      if (!site) throw notFound()
      const now = clock.now()
      const [open, soon, fires, boxes] = await Promise.all([
        pieces.open(site.id),
        services.between(site.id, now - 6 * hourMs, now + 36 * hourMs),
        cookers.listOfSite(site.id),
        devices.listOfSite(site.id),
      ])
      const [latest, outlook] = await Promise.all([
        readings.latestOf(boxes.flatMap((box) => box.channels.map((channel) => channel.id))),
        forecasts.latestOf(open.map((piece) => piece.id)),
      ])
      return {
        site,
        now: new Date(now).toISOString(),
        services: soon,
        cookers: fires,
        pieces: open,
        devices: boxes,
        latest,
        forecasts: outlook,
      }
    },
  }
}

async function siteBySlug(db: Knex, slug: string): Promise<Site | undefined> {
  const row: unknown = await db('sites').where({ slug }).first()
  const found = z
    .object({
      id: z.number(),
      slug: z.string(),
      name: z.string(),
      time_zone: z.string(),
      elevation_m: z.number(),
    })
    .optional()
    .parse(row)
  return (
    found && {
      id: found.id,
      slug: found.slug,
      name: found.name,
      timeZone: found.time_zone,
      elevationM: found.elevation_m,
    }
  )
}
