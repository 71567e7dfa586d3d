import { z } from 'zod'
import {
  Celsius,
  Id,
  Instant,
  Kilograms,
  NoBody,
  Nothing,
  PageQuery,
  PathId,
  SiteParams,
  Slug,
  pageOf,
} from './common.ts'
import { atSite, endpoint } from './endpoint.ts'
import { CookEvent, WrapMethodName } from './event.ts'
import { LatestForecast } from './forecast.ts'

/** Where a piece stands in its night, found from its events. */
export const pieceStages = ['waiting', 'cooking', 'wrapped', 'pulled', 'resting', 'holding', 'done'] as const
export const PieceStage = z.enum(pieceStages)
export type PieceStage = z.infer<typeof PieceStage>

export const Recipe = z
  .object({
    id: Id,
    slug: Slug,
    name: z.string(),
    cured: z.boolean(),
    pitSetC: Celsius,
    wrapAtC: Celsius,
    wrapMethod: WrapMethodName,
    pullAtC: Celsius,
    typicalKg: Kilograms,
  })
  .meta({ id: 'Recipe' })
export type Recipe = z.infer<typeof Recipe>

export const Piece = z
  .object({
    id: Id,
    /** Counts up with every change; name it in `If-Match`. */
    version: z.int(),
    site: Slug,
    label: z.string(),
    parentId: Id.nullable(),
    /** The sibling with a probe that a piece without one goes by. */
    followsId: Id.nullable(),
    serviceId: Id.nullable(),
    recipe: z.object({ id: Id, slug: Slug, name: z.string() }),
    cured: z.boolean(),
    rawKg: Kilograms,
    trimmedKg: Kilograms.nullable(),
    cookedKg: Kilograms.nullable(),
    slicedKg: Kilograms.nullable(),
    wrapAtC: Celsius,
    wrapMethod: WrapMethodName,
    pullAtC: Celsius,
    stage: PieceStage,
    /** The cooker it stands on, or stood on last. */
    cookerId: Id.nullable(),
    /** The cooker it cooks on, or cooked on last before it was pulled. */
    cookedOnId: Id.nullable(),
    position: z.string().nullable(),
    /** The probe in it now. */
    channelId: Id.nullable(),
    onAt: Instant.nullable(),
    wrappedAt: Instant.nullable(),
    wrappedWith: WrapMethodName.nullable(),
    pulledAt: Instant.nullable(),
    restAt: Instant.nullable(),
    holdAt: Instant.nullable(),
    doneAt: Instant.nullable(),
  })
  .meta({ id: 'Piece' })
export type Piece = z.infer<typeof Piece>

const Label = z
  .string()
  .trim()
  .min(1, 'Give it a name the crew will say.')
  .max(24, 'At most 24 characters: it stands on the wall.')

export const NewPiece = z.strictObject({
  /** The id of its `on` event, made by the client: sending the same start twice starts one piece. */
  eventId: z.uuid(),
  label: Label,
  recipeId: Id,
  cookerId: Id,
  position: z.string().trim().max(40).optional(),
  rawKg: Kilograms,
  onAt: Instant,
  channelId: Id.optional(),
  serviceId: Id.optional(),
  /** What the recipe says, unless said otherwise here. */
  cured: z.boolean().optional(),
  wrapAtC: Celsius.optional(),
  wrapMethod: WrapMethodName.optional(),
  pullAtC: Celsius.optional(),
})
export type NewPiece = z.infer<typeof NewPiece>

export const PieceChange = z
  .strictObject({
    label: Label,
    rawKg: Kilograms,
    wrapAtC: Celsius,
    wrapMethod: WrapMethodName,
    pullAtC: Celsius,
    serviceId: Id.nullable(),
    followsId: Id.nullable(),
  })
  .partial()
export type PieceChange = z.infer<typeof PieceChange>

export const PieceDetail = z
  .object({
    piece: Piece,
    cooker: z.object({ id: Id, name: z.string() }).nullable(),
    events: z.array(CookEvent),
    forecast: LatestForecast.nullable(),
  })
  .meta({ id: 'PieceDetail' })
export type PieceDetail = z.infer<typeof PieceDetail>

const tag = 'Pieces'
const PieceParams = z.object({ pieceId: PathId })

export const pieceEndpoints = {
  recipes: endpoint({
    method: 'get',
    path: '/api/sites/:site/recipes',
    tag,
    summary: 'The house’s recipes',
    access: atSite('site.view'),
    params: SiteParams,
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(Recipe) }),
    status: 200,
  }),
  list: endpoint({
    method: 'get',
    path: '/api/sites/:site/pieces',
    tag,
    summary: 'Pieces of a site, newest first; `which` tells tonight’s from past ones',
    access: atSite('history.view'),
    params: SiteParams,
    query: PageQuery.extend({ which: z.enum(['open', 'done', 'all']).default('all') }),
    body: NoBody,
    response: pageOf(Piece),
    status: 200,
  }),
  start: endpoint({
    method: 'post',
    path: '/api/sites/:site/pieces',
    tag,
    summary: 'Put a piece on a cooker, with a probe if there is one for it',
    access: atSite('piece.start'),
    params: SiteParams,
    query: Nothing,
    body: NewPiece,
    response: Piece,
    status: 201,
    versioned: true,
  }),
  get: endpoint({
    method: 'get',
    path: '/api/pieces/:pieceId',
    tag,
    summary: 'A piece with its events and newest forecast',
    access: atSite('history.view', 'pieceId'),
    params: PieceParams,
    query: Nothing,
    body: NoBody,
    response: PieceDetail,
    status: 200,
    versioned: true,
  }),
  change: endpoint({
    method: 'patch',
    path: '/api/pieces/:pieceId',
    tag,
    summary: 'Change a piece’s name, weight, targets or service',
    access: atSite('piece.edit', 'pieceId'),
    params: PieceParams,
    query: Nothing,
    body: PieceChange,
    response: Piece,
    status: 200,
    versioned: true,
  }),
  placeProbe: endpoint({
    method: 'put',
    path: '/api/pieces/:pieceId/probe',
    tag,
    summary: 'Put a probe into a piece, or take it out (`channelId` null)',
    access: atSite('probe.place', 'pieceId'),
    params: PieceParams,
    query: Nothing,
    body: z.strictObject({ channelId: Id.nullable(), at: Instant }),
    response: Piece,
    status: 200,
  }),
}
