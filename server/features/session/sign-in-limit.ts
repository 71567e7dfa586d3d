import { createHash } from 'node:crypto'
import type { RequestHandler } from 'express'
import { rateLimit, type Options } from 'express-rate-limit'
import { z } from 'zod'
import { tooMany } from '../../http/problem.ts'

/** How many failed tries to sign in are let through. */
export interface SignInLimit {
  windowMs: number
  perAddress: number
  perAccount: number
}

export const usualSignInLimit: SignInLimit = { windowMs: 15 * 60 * 1000, perAddress: 40, perAccount: 10 }

const Named = z.object({ email: z.string() })

/**
 * Refuses further tries with a 429 and `Retry-After`, by the caller's address (one guesser, many accounts) and by the
 * account (one account, many guessers). A sign-in that succeeds does not count.
 */
export function signInLimit({ windowMs, perAddress, perAccount }: SignInLimit): RequestHandler[] {
  const common = {
    windowMs,
    skipSuccessfulRequests: true,
    // Brings Retry-After with a refusal; without any header of this kind there would be none.
    standardHeaders: 'draft-8',
    legacyHeaders: false,
    // Anyone may send these headers; whether they are believed is the app's `trust proxy`.
    validate: { xForwardedForHeader: false, forwardedHeader: false },
    handler: (_request, _response, next) =>
      next(tooMany('Too many tries to sign in. Wait a while, then try again.')),
  } satisfies Partial<Options>
  return [
    rateLimit({ ...common, limit: perAddress }),
    rateLimit({ ...common, limit: perAccount, keyGenerator: (request) => accountKey(request.body) }),
  ]
}

/** A hash, so that addresses typed here do not lie about in memory; requests that name none share a key. */
function accountKey(body: unknown): string {
  const email = Named.safeParse(body).data?.email.trim().toLowerCase() ?? ''
  return createHash('sha256').update(email).digest('base64url')
}
