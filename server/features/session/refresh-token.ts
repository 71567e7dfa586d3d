import { createHash, randomBytes } from 'node:crypto'

/** Days that a refresh token is good for; each use starts them anew. */
export const refreshTokenLifeMs = 30 * 24 * 3600 * 1000

/**
 * How long after its use a token is still answered: two tabs of one browser may send the same one before either has
 * the next.
 */
export const sharedUseMs = 20 * 1000

/** 256 random bits. */
export function newRefreshToken(): string {
  return randomBytes(32).toString('base64url')
}

/** What is stored: a random secret of this length needs no salt and no slow hash. */
export function refreshTokenHash(token: string): Buffer {
  return createHash('sha256').update(token).digest()
}
