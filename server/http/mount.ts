import type { Request, Response, Router } from 'express'
import type { z } from 'zod'
import type { Access, DeviceAccess, Endpoint, SignedInAccess, SiteAccess, SiteSource } from '#shared/contract/endpoint.ts'
import { may, type Role } from '#shared/domain/permissions.ts'
import { badRequest, forbidden, notFound, unauthorized, versionRequired } from './problem.ts'

/** A person who is signed in, with the roles held at each site. */
export interface Person {
  userId: number
  name: string
  rolesBySite: ReadonlyMap<number, readonly Role[]>
}

/** A device that has shown its secret. */
export interface DeviceIdentity {
  deviceId: number
  username: string
  deviceSlug: string
  siteId: number
  siteSlug: string
}

/** The site that a request is about. */
export interface SiteContext {
  id: number
  slug: string
  name: string
  timeZone: string
}

/** How the mounter learns who asks and where. */
export interface Guard {
  /** The person of a valid access token; undefined without one or with a wrong or expired one. */
  person(request: Request): Promise<Person | undefined>
  /** The device of valid Basic credentials. */
  device(request: Request): Promise<DeviceIdentity | undefined>
  /** The site that a path parameter's value belongs to. */
  siteOf(source: SiteSource, value: string): Promise<SiteContext | undefined>
}

type Who<A extends Access> = A extends SiteAccess
  ? { person: Person; site: SiteContext }
  : A extends SignedInAccess
    ? { person: Person }
    : A extends DeviceAccess
      ? { device: DeviceIdentity }
      : object

/** What a handler is given: parsed input and who asks. */
export type Call<P extends z.ZodType, Q extends z.ZodType, B extends z.ZodType, A extends Access> = {
  params: z.output<P>
  query: z.output<Q>
  body: z.output<B>
  request: Request
  response: Response
  /** The version named in `If-Match`; there when the endpoint is versioned and changes something that exists. */
  version: number
} & Who<A>

/** Mounts an endpoint: checks who asks, parses what was sent, calls the handler, and replies with what it gives back. */
export type Mount = <
  P extends z.ZodType,
  Q extends z.ZodType,
  B extends z.ZodType,
  R extends z.ZodType,
  A extends Access,
>(
  endpoint: Endpoint<P, Q, B, R, A>,
  handler: (call: Call<P, Q, B, A>) => Promise<z.input<R>> | z.input<R>,
) => void
