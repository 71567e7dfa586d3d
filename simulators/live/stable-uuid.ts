import { createHash } from 'node:crypto'

/** An id that is the same for the same words: a UUID of version 8 (RFC 9562, section 5.8) from their SHA-256. */
export function stableUuid(...words: (string | number)[]): string {
  const hash = createHash('sha256').update(words.join('\u0000')).digest('hex')
  const variant = '89ab'.charAt(parseInt(hash.charAt(16), 16) % 4)
  return [
    hash.slice(0, 8),
    hash.slice(8, 12),
    `8${hash.slice(13, 16)}`,
    `${variant}${hash.slice(17, 20)}`,
    hash.slice(20, 32),
  ].join('-')
}
