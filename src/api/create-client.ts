import { z } from 'zod'
import { Problem } from '@/shared/contract/common.ts'
import type { Endpoint } from '@/shared/contract/endpoint.ts'
import { sessionEndpoints, type Session } from '@/shared/contract/session.ts'
import { ApiProblem, problemKind } from './api-problem.ts'

/** What a call sends: only the parts that its endpoint has. */
export type CallInput<E extends Endpoint> = Part<'params', z.input<E['params']>> &
  Part<'query', z.input<E['query']>> &
  Part<'body', z.input<E['body']>> & {
    /** The version of what is being changed, as it was seen; the server refuses when it is no longer that. */
    ifMatch?: number
    signal?: AbortSignal
  }

/** What takes nothing, or nothing that it must have. */
type Empty = Record<string, never>

/** A part may be left out when the schema takes nothing, or an empty object. */
type Part<Name extends string, Value> = [Value] extends [undefined]
  ? unknown
  : Empty extends Value
    ? { [key in Name]?: Value }
    : { [key in Name]: Value }

/** The input may be left out when nothing in it is required. */
type Arguments<Input> = Empty extends Input ? [input?: Input] : [input: Input]

export interface Client {
  /** Calls an endpoint of the contract and gives its parsed answer. Throws `ApiProblem` and nothing else. */
  call: <E extends Endpoint>(
    endpoint: E,
    ...input: Arguments<CallInput<E>>
  ) => Promise<z.output<E['response']>>
  /** Trades the refresh cookie for a new session, null where nobody is signed in; calls made at once share one request. */
  refresh(): Promise<Session | null>
  /** Sets or forgets the access token, which lives in memory alone. */
  setToken(token: string | null): void
  /** Called when a session could not be renewed: the person has to sign in again. */
  onSignedOut(listener: () => void): void
}

export interface ClientDeps {
  fetch(url: string, init: RequestInit): Promise<Response>
}

/** What any call may carry, once the endpoint's own types are out of the way. */
interface LooseInput {
  params?: unknown
  query?: unknown
  body?: unknown
  ifMatch?: number
  signal?: AbortSignal
}

/** Makes the page's HTTP client. */
export function createClient(deps: ClientDeps): Client {
  let token: string | null = null
  let refreshing: Promise<Session | null> | undefined
  let signedOut: () => void = () => undefined

  async function send(endpoint: Endpoint, input: LooseInput): Promise<Response> {
    const headers: Record<string, string> = { accept: 'application/json' }
    if (token !== null && endpoint.access.kind !== 'public') headers['authorization'] = `Bearer ${token}`
    if (input.ifMatch !== undefined) headers['if-match'] = `"${input.ifMatch}"`
    const init: RequestInit = { method: endpoint.method.toUpperCase(), headers, credentials: 'same-origin' }
    if (input.signal !== undefined) init.signal = input.signal
    if (input.body !== undefined) {
      headers['content-type'] = 'application/json'
      init.body = JSON.stringify(input.body)
    }
    const url = addressOf(endpoint.path, input.params, input.query)
    return deps.fetch(url, init).catch((cause: unknown) => {
      if (input.signal?.aborted === true) throw cause
      throw new ApiProblem('offline', 0, undefined, { cause })
    })
  }

  async function callOnce<E extends Endpoint>(
    endpoint: E,
    input: LooseInput,
  ): Promise<z.output<E['response']>> {
    const response = await send(endpoint, input)
    if (!response.ok && response.status !== endpoint.unwellStatus) throw await problemOf(response)
    const answer = response.status === 204 ? undefined : await jsonOf(response)
    const parsed = z.safeParse<E['response']>(endpoint.response, answer)
    if (!parsed.success)
      throw new ApiProblem('unreadable', response.status, undefined, { cause: parsed.error })
    return parsed.data
  }

  function refresh(): Promise<Session | null> {
    refreshing ??= call(sessionEndpoints.refresh)
      .then((session) => {
        token = session?.token ?? null
        return session
      })
      .finally(() => {
        refreshing = undefined
      })
    return refreshing
  }

  async function call<E extends Endpoint>(
    endpoint: E,
    ...[input]: Arguments<CallInput<E>>
  ): Promise<z.output<E['response']>> {
    const sent: LooseInput = input ?? {}
    return callOnce(endpoint, sent).catch(async (error: unknown) => {
      if (
        !(error instanceof ApiProblem) ||
        error.kind !== 'signed-out' ||
        endpoint.access.kind === 'public'
      ) {
        throw error
      }
      const session = await refresh().catch((cause: unknown) => {
        if (cause instanceof ApiProblem && cause.kind === 'signed-out') return null
        throw cause
      })
      if (session === null) {
        token = null
        signedOut()
        throw error
      }
      return callOnce(endpoint, sent)
    })
  }

  return {
    call,
    refresh,
    setToken: (value) => {
      token = value
    },
    onSignedOut: (listener) => {
      signedOut = listener
    },
  }
}

/** Fills `:names` of a path and appends the query; undefined values are left out. */
export function addressOf(path: string, params: unknown, query: unknown): string {
  const given = new Map(Object.entries(params ?? {}))
  const filled = path.replace(/:(\w+)/g, (_, name: string) => {
    const value: unknown = given.get(name)
    if (typeof value !== 'string' && typeof value !== 'number') throw new TypeError(`${path} needs ${name}`)
    return encodeURIComponent(value)
  })
  const search = new URLSearchParams()
  for (const [name, value] of Object.entries(query ?? {})) {
    if (value !== undefined && value !== null) search.set(name, String(value))
  }
  const text = search.toString()
  return text === '' ? filled : `${filled}?${text}`
}

async function jsonOf(response: Response): Promise<unknown> {
  try {
    const value: unknown = await response.json()
    return value
  } catch (cause) {
    throw new ApiProblem('unreadable', response.status, undefined, { cause })
  }
}

async function problemOf(response: Response): Promise<ApiProblem> {
  const body: unknown = await response.json().catch(() => undefined)
  const problem = Problem.safeParse(body)
  const kind = problemKind(response.status)
  return problem.success
    ? new ApiProblem(kind, response.status, problem.data)
    : new ApiProblem(kind, response.status)
}
