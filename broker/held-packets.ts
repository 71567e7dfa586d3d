import { packetKind, type PacketKind } from './packet-kind.ts'

/** The bytes of a connection that have come and have not gone on yet, and which packets they make. */
export interface HeldPackets {
  /** Bytes that have come; the packets that end in them are named by `note`. */
  hold: (part: Buffer) => void
  note: (bytes: number, kind: PacketKind) => void
  /** Whole packets that are held. */
  count: () => number
  bytes: () => number
  /** The first of them. */
  size: () => number
  kind: () => PacketKind
  /** Where its bytes stand, in one piece. */
  join: () => { chunk: Buffer; from: number; end: number }
  /** The next one is the first. Its bytes stay until they are taken or discarded. */
  advance: () => void
  discard: (bytes: number) => void
  take: (bytes: number, pass: (part: Buffer) => void) => void
  clear: () => void
}

/** @param together counts what all connections hold */
export function createHeldPackets(together: { heldBytes: number }): HeldPackets {
  const chunks: Buffer[] = []
  /** Sizes and kinds of the whole packets in `chunks`; those before `first` have gone. */
  let sizes: number[] = []
  let kinds: PacketKind[] = []
  let first = 0
  /** Bytes of the first of `chunks` that have gone. */
  let headAt = 0
  let heldBytes = 0

  function changeBytes(by: number): void {
    heldBytes += by
    together.heldBytes += by
  }

  function forgetPackets(): void {
    sizes = []
    kinds = []
    first = 0
  }

  /** Goes on by so many bytes of the first chunk. */
  function goOn(bytes: number): void {
    headAt += bytes
    if (headAt < (chunks[0]?.length ?? 0)) return
    chunks.shift()
    headAt = 0
  }

  return {
    hold: (part) => {
      if (part.length === 0) return
      chunks.push(part)
      changeBytes(part.length)
    },
    note: (bytes, kind) => {
      sizes.push(bytes)
      kinds.push(kind)
    },
    count: () => sizes.length - first,
    bytes: () => heldBytes,
    size: () => sizes[first] ?? 0,
    kind: () => kinds[first] ?? packetKind.other,
    join: () => {
      const size = sizes[first] ?? 0
      const head = chunks[0] ?? Buffer.alloc(0)
      if (head.length - headAt >= size) return { chunk: head, from: headAt, end: headAt + size }
      let parts = 1
      let length = head.length - headAt
      while (length < size && parts < chunks.length) length += chunks[parts++]?.length ?? 0
      const joined = Buffer.concat([head.subarray(headAt), ...chunks.slice(1, parts)])
      chunks.splice(0, parts, joined)
      headAt = 0
      return { chunk: joined, from: 0, end: size }
    },
    advance: () => {
      if (++first === sizes.length) forgetPackets()
    },
    discard: (bytes) => {
      changeBytes(-bytes)
      goOn(bytes)
    },
    take: (bytes, pass) => {
      changeBytes(-bytes)
      let left = bytes
      for (let chunk = chunks[0]; chunk && left > 0; chunk = chunks[0]) {
        const part = chunk.subarray(headAt, Math.min(chunk.length, headAt + left))
        left -= part.length
        goOn(part.length)
        pass(part)
      }
    },
    clear: () => {
      changeBytes(-heldBytes)
      chunks.length = 0
      headAt = 0
      forgetPackets()
    },
  }
}
