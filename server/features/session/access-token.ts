import jwt from 'jsonwebtoken'
import { z } from 'zod'
import type { Clock } from '#shared/domain/clock.ts'

/** Seconds that an access token is good for. */
export const accessTokenLifeS = 15 * 60

const algorithm = 'HS256'
const issuer = 'coalhand'

/** The subject is the number of a person. */
const Claims = z.object({
  sub: z
    .string()
    .regex(/^\d{1,9}$/)
    .transform(Number),
})

/** Access tokens: who, and until when. Nothing about roles, which may change while one lasts. */
export interface AccessTokens {
  issue(userId: number): string
  /** The person's number; undefined when the token is false, foreign or too old. */
  verify(token: string): number | undefined
}

/** JSON Web Tokens (RFC 7519) signed with HMAC SHA-256, on the given clock. */
export function createAccessTokens(key: string, clock: Clock): AccessTokens {
  const seconds = () => Math.floor(clock.now() / 1000)
  return {
    issue: (userId) =>
      jwt.sign({ iat: seconds() }, key, {
        algorithm,
        issuer,
        subject: String(userId),
        expiresIn: accessTokenLifeS,
      }),
    verify: (token) => {
      try {
        const options = {
          algorithms: [algorithm],
          issuer,
          clockTimestamp: seconds(),
        } satisfies jwt.VerifyOptions
        return Claims.parse(jwt.verify(token, key, options)).sub
      } catch {
        return undefined
      }
    },
  }
}
