import { createHash } from 'node:crypto'

/** A namespace of our own (drawn once at random), so that names of the demo house meet nobody else's. */
const demoNamespace = '7d0f3b0e-58c1-4a9e-9a5d-2f6b8c1e4d37'

/** An id that is always the same for the same name: UUID version 5, RFC 9562 section 5.5. */
export function namedUuid(name: string, namespace = demoNamespace): string {
  const hash = createHash('sha1')
    .update(Buffer.from(namespace.replaceAll('-', ''), 'hex'))
    .update(name)
    .digest()
    .subarray(0, 16)
  hash.writeUInt8((hash.readUInt8(6) & 0x0f) | 0x50, 6)
  hash.writeUInt8((hash.readUInt8(8) & 0x3f) | 0x80, 8)
  const hex = hash.toString('hex')
  return [hex.slice(0, 8), hex.slice(8, 12), hex.slice(12, 16), hex.slice(16, 20), hex.slice(20)].join('-')
}
