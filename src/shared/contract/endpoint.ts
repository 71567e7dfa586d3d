import type { z } from 'zod'
import type { Action } from '../domain/permissions.ts'

/** Where the site of a guarded endpoint comes from: the path parameter that names it or something that belongs to it. */
export const siteSources = ['site', 'pieceId', 'cookerId', 'channelId', 'deviceId'] as const
export type SiteSource = (typeof siteSources)[number]

/** Anyone. */
export interface PublicAccess {
  kind: 'public'
}
/** Any person who is signed in. */
export interface SignedInAccess {
  kind: 'signed-in'
}
/** A device: HTTP Basic with its user name and secret. */
export interface DeviceAccess {
  kind: 'device'
}
/** A person whose roles at the site allow the action. */
export interface SiteAccess {
  kind: 'site'
  action: Action
  by: SiteSource
}
/** A person whose roles at any one site allow the action: for what belongs to the house rather than to a site. */
export interface AnySiteAccess {
  kind: 'any-site'
  action: Action
}
/** Who may call an endpoint. */
export type Access = PublicAccess | SignedInAccess | DeviceAccess | SiteAccess | AnySiteAccess

/**
 * One HTTP endpoint: the server mounts it, the client calls it, the OpenAPI page is made from it.
 * `path` uses Express's `:name` form.
 */
export interface Endpoint<
  Params extends z.ZodType = z.ZodType,
  Query extends z.ZodType = z.ZodType,
  Body extends z.ZodType = z.ZodType,
  Response extends z.ZodType = z.ZodType,
  Who extends Access = Access,
> {
  method: 'get' | 'post' | 'put' | 'patch' | 'delete'
  path: string
  /** The heading it stands under in the API page. */
  tag: string
  summary: string
  access: Who
  params: Params
  query: Query
  body: Body
  response: Response
  status: 200 | 201 | 204
  /** A status that the handler may set instead, for the same answer: what is asked about is not well. */
  unwellStatus?: 503
  /** Answers carry an `ETag`; a change must name it in `If-Match`. */
  versioned?: boolean
}

/** Declares an endpoint and keeps its exact types. */
export function endpoint<
  P extends z.ZodType,
  Q extends z.ZodType,
  B extends z.ZodType,
  R extends z.ZodType,
  A extends Access,
>(definition: Endpoint<P, Q, B, R, A>): Endpoint<P, Q, B, R, A> {
  return definition
}

/** Access by a role at the site that the named path parameter belongs to. */
export function atSite(action: Action, by: SiteSource = 'site'): SiteAccess {
  return { kind: 'site', action, by }
}

/** Access by a role at any site of the house. */
export function atAnySite(action: Action): AnySiteAccess {
  return { kind: 'any-site', action }
}
