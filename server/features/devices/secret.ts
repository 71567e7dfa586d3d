import { createHash, randomBytes, timingSafeEqual } from 'node:crypto'

/** A new device secret: 256 random bits, so that a plain hash is enough to keep it. */
export function newSecret(): string {
  return randomBytes(32).toString('base64url')
}

/** What is kept of a secret. */
export function hashOfSecret(secret: string): Buffer {
  return createHash('sha256').update(secret).digest()
}

/** Whether two hashes are the same, in a time that does not tell how much of them is. */
export function isSameHash(one: Buffer, other: Buffer): boolean {
  return one.length === other.length && timingSafeEqual(one, other)
}
