import type { Endpoint } from '#shared/contract/endpoint.ts'
import { sessionEndpoints } from '#shared/contract/session.ts'
import { Problem } from '#shared/contract/common.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { z } from 'zod'

/** Somebody of the house. */
export interface Account {
  email: string
  password: string
}

/** An answer that says why something was not done. */
export class ApiProblem extends Error {
  readonly status: number
  constructor(status: number, message: string) {
    super(message)
    this.status = status
  }
}

/** What a call carries. */
export interface CallInput {
  params?: Record<string, string | number>
  body?: unknown
}

/** The product's HTTP API, used as one person. */
export interface HouseApi {
  /** @throws ApiProblem with the status and the reason when the answer is a refusal */
  call<R extends z.ZodType>(
    endpoint: Endpoint<z.ZodType, z.ZodType, z.ZodType, R>,
    input?: CallInput,
  ): Promise<z.infer<R>>
}

/** Signs in when it must, and again when its token has run out; every answer is parsed with the contract's schema. */
export function createHouseApi(options: { baseUrl: string; account: Account; clock: Clock }): HouseApi {
  const { baseUrl, account, clock } = options
  let token: { value: string; untilMs: number } | undefined

  return {
    async call(endpoint, input = {}) {
      const answer = await request(endpoint, input, await bearer())
      if (answer.status !== 401) return read(endpoint, answer)
      token = undefined
      return read(endpoint, await request(endpoint, input, await bearer()))
    },
  }

  async function bearer(): Promise<string> {
    if (token !== undefined && token.untilMs > clock.now() + 30_000) return token.value
    const answer = await request(sessionEndpoints.signIn, {
      body: { email: account.email, password: account.password },
    })
    const session = await read(sessionEndpoints.signIn, answer)
    token = { value: session.token, untilMs: clock.now() + session.expiresInS * 1000 }
    return token.value
  }

  async function request(endpoint: Endpoint, input: CallInput, bearerToken?: string): Promise<Response> {
    const path = endpoint.path.replace(/:(\w+)/g, (_, name: string) => {
      return encodeURIComponent(String(input.params?.[name] ?? ''))
    })
    return fetch(new URL(path, baseUrl), {
      method: endpoint.method.toUpperCase(),
      headers: {
        ...(bearerToken === undefined ? {} : { Authorization: `Bearer ${bearerToken}` }),
        ...(input.body === undefined ? {} : { 'Content-Type': 'application/json' }),
      },
      ...(input.body === undefined ? {} : { body: JSON.stringify(input.body) }),
      signal: AbortSignal.timeout(10_000),
    })
  }

  async function read<R extends z.ZodType>(
    endpoint: Endpoint<z.ZodType, z.ZodType, z.ZodType, R>,
    answer: Response,
  ): Promise<z.infer<R>> {
    const text = await answer.text()
    if (!answer.ok) throw new ApiProblem(answer.status, reasonOf(text))
    return endpoint.response.parse(text === '' ? undefined : JSON.parse(text))
  }
}

function reasonOf(text: string): string {
  try {
    const problem = Problem.parse(JSON.parse(text))
    return problem.detail ?? problem.title
  } catch {
    return text.slice(0, 200)
  }
}
