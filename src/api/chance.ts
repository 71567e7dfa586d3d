import { seededRandom, type Random } from '@/shared/domain/random.ts'

/** A source of chance for this page, seeded by the browser's own; for jitter, not for secrets. */
export function pageRandom(): Random {
  return seededRandom(...crypto.getRandomValues(new Uint32Array(4)))
}

/**
 * A new random UUID (RFC 9562, version 4) for something that is made on this page, so that sending it twice makes
 * it once. `crypto.randomUUID` does not exist on a plain-HTTP address of the house's network; this does.
 */
export function newId(): string {
  const bytes = crypto.getRandomValues(new Uint8Array(16))
  const [versionByte = 0, variantByte = 0] = [bytes[6], bytes[8]]
  bytes[6] = (versionByte & 0x0f) | 0x40
  bytes[8] = (variantByte & 0x3f) | 0x80
  const hex = Array.from(bytes, (byte) => byte.toString(16).padStart(2, '0')).join('')
  return [hex.slice(0, 8), hex.slice(8, 12), hex.slice(12, 16), hex.slice(16, 20), hex.slice(20)].join('-')
}
