import { createHash, randomBytes, timingSafeEqual } from 'node:crypto'

/** A new device secret: 256 random bits, so that a plain hash is enough to keep it. */
export function newSecret(): string {
  return randomBytes(32).toString('base64url')
}

/** What is kept of a secret. */
export function hashOfSecret(secret: string): Buffer {
  return createHash('sha256').update(secret).digest()
}

/** Whether a hash is the secret's, in a time that does not tell how much of it is. */
export function isHashOf(hash: Buffer, secret: string): boolean {
  const own = hashOfSecret(secret)
  return hash.length === own.length && timingSafeEqual(hash, own)
}
