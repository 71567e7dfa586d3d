import { z } from 'zod'
import { cookerKinds } from '../domain/cooking.ts'
import { Celsius, Id, NoBody, Nothing, PathId, SiteParams, Slug } from './common.ts'
import { atSite, endpoint } from './endpoint.ts'

export const CookerKindName = z.enum(cookerKinds)

export const Cooker = z
  .object({
    id: Id,
    version: z.int(),
    site: Slug,
    name: z.string(),
    kind: CookerKindName,
    /** How many pieces fit on it. */
    capacity: z.int().positive(),
    /** Its place on the wall, from the top. */
    position: z.int(),
    pitSetC: Celsius,
    bandLowC: Celsius,
    bandHighC: Celsius,
    /** The channel of the pit probe that stands for this cooker now; null when none does. */
    pitChannelId: Id.nullable(),
  })
  .meta({ id: 'Cooker' })
export type Cooker = z.infer<typeof Cooker>

const CookerFields = z.strictObject({
  name: z.string().trim().min(1, 'Give the cooker a name.').max(40),
  kind: CookerKindName,
  capacity: z.int().min(1).max(500),
  pitSetC: Celsius,
  bandLowC: Celsius,
  bandHighC: Celsius,
})
const bandInOrder = {
  check: (cooker: { bandLowC?: number | undefined; bandHighC?: number | undefined }) =>
    cooker.bandLowC === undefined || cooker.bandHighC === undefined || cooker.bandLowC < cooker.bandHighC,
  message: { message: 'The low end of the band must lie below the high end.', path: ['bandLowC'] },
}
export const NewCooker = CookerFields.refine(bandInOrder.check, bandInOrder.message)
export type NewCooker = z.infer<typeof NewCooker>
export const CookerChange = CookerFields.partial().refine(bandInOrder.check, bandInOrder.message)
export type CookerChange = z.infer<typeof CookerChange>

const tag = 'Cookers'
const CookerParams = z.object({ cookerId: PathId })

export const cookerEndpoints = {
  list: endpoint({
    method: 'get',
    path: '/api/sites/:site/cookers',
    tag,
    summary: 'The cookers of a site, in the wall’s order',
    access: atSite('site.view'),
    params: SiteParams,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(Cooker) }),
    status: 200,
  }),
  add: endpoint({
    method: 'post',
    path: '/api/sites/:site/cookers',
    tag,
    summary: 'Add a cooker to a site',
    access: atSite('cooker.edit'),
    params: SiteParams,
    query: Nothing,
    body: NewCooker,
    response: Cooker,
    status: 201,
    versioned: true,
  }),
  change: endpoint({
    method: 'patch',
    path: '/api/cookers/:cookerId',
    tag,
    summary: 'Change a cooker’s name, capacity, set or band',
    access: atSite('cooker.edit', 'cookerId'),
    params: CookerParams,
    query: Nothing,
    body: CookerChange,
    response: Cooker,
    status: 200,
    versioned: true,
  }),
  placeProbe: endpoint({
    method: 'put',
    path: '/api/cookers/:cookerId/probe',
    tag,
    summary: 'Say which channel reads this pit, or that none does (`channelId` null)',
    access: atSite('probe.place', 'cookerId'),
    params: CookerParams,
    query: Nothing,
    body: z.strictObject({ channelId: Id.nullable() }),
    response: Cooker,
    status: 200,
  }),
}
