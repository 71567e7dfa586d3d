import { z } from 'zod'
import { wrapMethods } from '../domain/cooking.ts'
import { Celsius, Id, Instant, Kilograms, PathId, Nothing, NoBody } from './common.ts'
import { atSite, endpoint } from './endpoint.ts'

export const WrapMethodName = z.enum(wrapMethods)
const Position = z.string().max(40)

/** What happened, with what belongs to it. Kinds of a piece and kinds of a cooker stand in one union. */
export const EventFact = z.discriminatedUnion('kind', [
  z.strictObject({ kind: z.literal('on'), cookerId: Id, position: Position.optional() }),
  z.strictObject({ kind: z.literal('spritz') }),
  z.strictObject({ kind: z.literal('wrap'), method: WrapMethodName.exclude(['none']) }),
  z.strictObject({ kind: z.literal('moved'), toCookerId: Id, position: Position.optional() }),
  z.strictObject({ kind: z.literal('probe_reseated') }),
  z.strictObject({ kind: z.literal('pull'), by: z.enum(['temperature', 'feel']) }),
  z.strictObject({ kind: z.literal('rest') }),
  z.strictObject({ kind: z.literal('hold'), cookerId: Id.optional() }),
  z.strictObject({ kind: z.literal('sliced') }),
  z.strictObject({
    kind: z.literal('weighed'),
    stage: z.enum(['trimmed', 'cooked', 'sliced']),
    kg: Kilograms,
  }),
  z.strictObject({ kind: z.literal('note') }),
  z.strictObject({ kind: z.literal('pit_set'), pitSetC: Celsius }),
  z.strictObject({ kind: z.literal('fire_tended') }),
  /** Takes back the event that `correctsId` names: undo, or an entry made on the wrong piece. */
  z.strictObject({ kind: z.literal('withdrawn') }),
])
export type EventFact = z.infer<typeof EventFact>
export type EventKind = EventFact['kind']

/** Kinds that are logged on a cooker; all others, but notes and withdrawals, belong to a piece. */
export const cookerEventKinds = ['pit_set', 'fire_tended'] as const satisfies readonly EventKind[]

/** An event to log. Its id is made by the client, so that sending it twice logs it once. */
export const NewEvent = z.strictObject({
  id: z.uuid(),
  happenedAt: Instant,
  fact: EventFact,
  note: z.string().trim().max(2000).optional(),
  /** The event that this one replaces (same kind) or takes back (`withdrawn`). */
  correctsId: z.uuid().optional(),
})
export type NewEvent = z.infer<typeof NewEvent>

export const CookEvent = z
  .object({
    id: z.uuid(),
    pieceId: Id.nullable(),
    cookerId: Id.nullable(),
    happenedAt: Instant,
    recordedAt: Instant,
    by: z.object({ id: Id, name: z.string() }).nullable(),
    fact: EventFact,
    note: z.string().nullable(),
    correctsId: z.uuid().nullable(),
    /** Set when a later event replaced this one or took it back. */
    correctedById: z.uuid().nullable(),
  })
  .meta({ id: 'Event' })
export type CookEvent = z.infer<typeof CookEvent>

const tag = 'Events'

export const eventEndpoints = {
  ofPiece: endpoint({
    method: 'get',
    path: '/api/pieces/:pieceId/events',
    tag,
    summary: 'Everything logged on a piece, corrections included, oldest first',
    access: atSite('history.view', 'pieceId'),
    params: z.object({ pieceId: PathId }),
    query: Nothing,
    body: NoBody,
    response: z.object({ items: z.array(CookEvent) }),
    status: 200,
  }),
  logOnPiece: endpoint({
    method: 'post',
    path: '/api/pieces/:pieceId/events',
    tag,
    summary: 'Log an event on a piece, or correct one',
    access: atSite('cook.log', 'pieceId'),
    params: z.object({ pieceId: PathId }),
    query: Nothing,
    body: NewEvent,
    response: CookEvent,
    status: 201,
  }),
  logOnCooker: endpoint({
    method: 'post',
    path: '/api/cookers/:cookerId/events',
    tag,
    summary: 'Log fire tending or a change of the pit’s set, or correct it',
    access: atSite('cook.log', 'cookerId'),
    params: z.object({ cookerId: PathId }),
    query: Nothing,
    body: NewEvent,
    response: CookEvent,
    status: 201,
  }),
}
