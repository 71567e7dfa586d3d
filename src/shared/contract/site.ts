import { z } from 'zod'
import { Id, Instant, NoBody, Nothing, SiteParams, Slug } from './common.ts'
import { Cooker } from './cooker.ts'
import { Device } from './device.ts'
import { atSite, endpoint } from './endpoint.ts'
import { LatestForecast } from './forecast.ts'
import { Piece } from './piece.ts'
import { Role } from './session.ts'

export const Site = z
  .object({
    id: Id,
    slug: Slug,
    name: z.string(),
    /** IANA name, such as `America/Chicago`. */
    timeZone: z.string(),
    elevationM: z.number(),
  })
  .meta({ id: 'Site' })
export type Site = z.infer<typeof Site>

export const Service = z
  .object({
    id: Id,
    site: Slug,
    /** The business day it belongs to. */
    date: z.iso.date(),
    servesAt: Instant,
    portions: z.int().nonnegative(),
    note: z.string().nullable(),
  })
  .meta({ id: 'Service' })
export type Service = z.infer<typeof Service>

/** The newest reading of a channel, corrected. */
export const LatestReading = z.object({ channelId: Id, at: Instant, c: z.number() })
export type LatestReading = z.infer<typeof LatestReading>

/** Everything of a site's running night but the lines: what the wall starts from. */
export const Tonight = z
  .object({
    site: Site,
    now: Instant,
    services: z.array(Service),
    cookers: z.array(Cooker),
    pieces: z.array(Piece),
    devices: z.array(Device),
    latest: z.array(LatestReading),
    forecasts: z.array(LatestForecast),
  })
  .meta({ id: 'Tonight' })
export type Tonight = z.infer<typeof Tonight>

const tag = 'Sites'

export const siteEndpoints = {
  list: endpoint({
    method: 'get',
    path: '/api/sites',
    tag,
    summary: 'The sites you may see, and your roles there',
    access: { kind: 'signed-in' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(Site.extend({ roles: z.array(Role) })) }),
    status: 200,
  }),
  tonight: endpoint({
    method: 'get',
    path: '/api/sites/:site/tonight',
    tag,
    summary: 'The running night of a site: cookers, pieces, devices, newest readings and forecasts',
    access: atSite('site.view'),
    params: SiteParams,
    query: Nothing,
    body: NoBody,
    response: Tonight,
    status: 200,
  }),
  addService: endpoint({
    method: 'post',
    path: '/api/sites/:site/services',
    tag,
    summary: 'Add a service hour',
    access: atSite('service.edit'),
    params: SiteParams,
    query: Nothing,
    body: z.strictObject({
      servesAt: Instant,
      portions: z.int().min(0).max(100_000),
      note: z.string().trim().max(500).optional(),
    }),
    response: Service,
    status: 201,
  }),
}
