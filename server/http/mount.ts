import { isDeepStrictEqual } from 'node:util'
import type { Request, Response, Router } from 'express'
import { z } from 'zod'
import type {
  Access,
  AnySiteAccess,
  DeviceAccess,
  Endpoint,
  SignedInAccess,
  SiteAccess,
  SiteSource,
} from '#shared/contract/endpoint.ts'
import { may, type Role } from '#shared/domain/permissions.ts'
import { parseInput } from './parse-input.ts'
import { badRequest, forbidden, notFound, unauthorized, unavailable, versionRequired } from './problem.ts'
import { within } from './within.ts'

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
  : A extends SignedInAccess | AnySiteAccess
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
  /** The version named in `If-Match` when the endpoint is versioned and changes something that exists, else 0. */
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

/** A database that is frozen says nothing, for as long as it is: nobody waits for it longer than this, in ms. */
const usualPatienceMs = 5000

/**
 * Makes the mounter of a router. Every route goes the same way: who asks (401, 404, 403), what was sent (400, 428),
 * the handler, the reply. What any of them throws goes to the error handler; nothing is caught here.
 * @param options.patienceMs how long an answer may take (503)
 * @param options.checkAnswers compare each answer with the contract, so that a break shows as an error (not in production)
 */
export function createMount(
  router: Router,
  guard: Guard,
  options: { checkAnswers?: boolean; patienceMs?: number } = {},
): Mount {
  const patienceMs = options.patienceMs ?? usualPatienceMs
  return (endpoint, handler) => {
    const answerTo = async (request: Request, response: Response) => {
      const who = await identify(endpoint.access, guard, request, response)
      const input = {
        params: parseInput('path', endpoint.params, request.params),
        query: parseInput('query', endpoint.query, request.query),
        body: parseInput('body', endpoint.body, request.body),
        version: namesVersion(endpoint) ? versionAsked(request) : 0,
        request,
        response,
      }
      const call = { ...input, ...who }
      // `identify` gives what the access kind promises; the compiler cannot follow a conditional type over a value.
      const answer = await handler(call as typeof call & Who<typeof endpoint.access>)
      if (options.checkAnswers) checkAnswer(endpoint, answer)
      return answer
    }
    router[endpoint.method](endpoint.path, async (request, response) => {
      reply(endpoint, await within(patienceMs, answerTo(request, response), noAnswerInTime), response)
    })
  }
}

function noAnswerInTime(): Error {
  return unavailable(
    'The server could not answer in time. What you asked for may still be done: look before you ask again.',
  )
}

/** Who asks, or the refusal. A thing at a site where the person has no role is answered like one that is not there. */
async function identify(
  access: Access,
  guard: Guard,
  request: Request,
  response: Response,
): Promise<{ person?: Person; site?: SiteContext; device?: DeviceIdentity }> {
  if (access.kind === 'public') return {}
  if (access.kind === 'device') {
    const device = await guard.device(request)
    if (device) return { device }
    response.set('WWW-Authenticate', 'Basic realm="Coalhand devices", charset="UTF-8"')
    throw unauthorized('Send the device’s user name and secret (HTTP Basic).')
  }
  const person = await guard.person(request)
  if (!person) {
    response.set('WWW-Authenticate', 'Bearer realm="Coalhand"')
    throw unauthorized()
  }
  if (access.kind === 'signed-in') return { person }
  if (access.kind === 'any-site') {
    if (![...person.rolesBySite.values()].some((roles) => may(roles, access.action))) throw forbidden()
    return { person }
  }

  const value = request.params[access.by]
  const site = typeof value === 'string' ? await guard.siteOf(access.by, value) : undefined
  const held = site && person.rolesBySite.get(site.id)
  if (!site || !held || held.length === 0) throw notFound()
  if (!may(held, access.action)) throw forbidden()
  return { person, site }
}

/** Whether a call changes something that two people may edit, and so must say which version it saw. */
function namesVersion(endpoint: Endpoint): boolean {
  return endpoint.versioned === true && (endpoint.method === 'put' || endpoint.method === 'patch')
}

/** RFC 9110 section 13.1.1; a proxy that compresses may have made the tag weak, the number still counts. */
function versionAsked(request: Request): number {
  const header = request.get('If-Match')
  if (header === undefined) throw versionRequired()
  const [, version] = /^(?:W\/)?"(\d{1,9})"$/.exec(header.trim()) ?? []
  if (version === undefined)
    throw badRequest('If-Match must name one version, such as "3" with its quotation marks.')
  return Number(version)
}

/** Where an answer carries its version: itself, or the piece within it. */
const Versioned = z.union([
  z.object({ version: z.int() }),
  z.object({ piece: z.object({ version: z.int() }) }).transform(({ piece }) => piece),
])

/**
 * Ends the response by hand: Express would add a tag of its own and answer 304 to a matching If-None-Match, but a
 * version here tells edits apart, not everything that an answer may show (a forecast, say).
 */
function reply(endpoint: Endpoint, answer: unknown, response: Response): void {
  // A handler that found things unwell has said so.
  if (endpoint.unwellStatus === undefined || response.statusCode !== endpoint.unwellStatus) {
    response.status(endpoint.status)
  }
  if (endpoint.versioned) {
    const versioned = Versioned.safeParse(answer)
    if (versioned.success) response.set('ETag', `"${versioned.data.version}"`)
  }
  if (answer === undefined) {
    response.end()
    return
  }
  response.type('json').end(JSON.stringify(answer))
}

/** Throws when an answer breaks the contract: a wrong or missing field, or one the contract does not name. */
function checkAnswer(endpoint: Endpoint, answer: unknown): void {
  const name = `${endpoint.method.toUpperCase()} ${endpoint.path}`
  const parsed = endpoint.response.safeParse(answer)
  if (!parsed.success)
    throw new Error(`${name} answers against its contract:\n${z.prettifyError(parsed.error)}`)
  if (!isDeepStrictEqual(asSent(parsed.data), asSent(answer))) {
    throw new Error(`${name} answers with fields that its contract does not name.`)
  }
}

/** What arrives at the other end; `undefined` fields do not. */
function asSent(value: unknown): unknown {
  return value === undefined ? undefined : JSON.parse(JSON.stringify(value))
}
