import { Duplex } from 'node:stream'
import { createPacketScanner, isPublish, isUnacknowledged, type ScanFault } from './packet-scanner.ts'
import { createTokenBucket, type TokenBucket } from './token-bucket.ts'

export interface GateLimits {
  /** A larger packet is a fault, in bytes with its fixed header. */
  maxPacketBytes: number
  /**
   * What may be held of one client's packets before its socket is not read any more, in bytes: as long as it is read,
   * pings are seen and answered. With less than `minHeldBytes` it is read even when all clients together hold more than
   * `maxHeldTogether`.
   */
  maxHeldBytes: number
  minHeldBytes: number
  maxHeldTogether: number
  /** PUBLISH packets let through and not finished yet. */
  maxInFlight: number
  /** Packets let through a second in the long run, and at once after a silence. */
  packetsPerSecond: number
  burst: number
}

/** A socket as the broker sees it: whole packets only, and no more of them than can be worked off. */
export interface Gate {
  stream: Duplex
  /** The client is connected: from now on more than its CONNECT is let through. */
  open(): void
  /** One PUBLISH that was let through is finished. */
  finished(): void
  /** Looks again whether something may be let through, after `isPressed` has changed. */
  pump(): void
  /** Counts time in which the client could have been heard; the sum since its last byte, in ms. */
  countSilence(ms: number): number
  /** Cuts the connection without waiting for anything. */
  cut(): void
}

/** What the gates of a broker share. */
export interface Together {
  heldBytes: number
  /** Limits PUBLISH at QoS 0 of all clients: whoever sends at QoS 1 is slowed by waiting for acknowledgements. */
  unacknowledged: TokenBucket
}

/** Of a packet that is held, what its passing depends on. */
const kind = { other: 0, publish: 1, unacknowledged: 2 } as const
type Kind = (typeof kind)[keyof typeof kind]

const pingResponse = Uint8Array.from([0xd0, 0])
const pingRequestByte = 0xc0
const maxUnreadBytes = 16 * 1024
/** How long a client that was too quick waits, in ms. */
const refillMs = 10

/**
 * Stands between a socket and the broker. It stops at the fixed header of a packet that is too large, so that its
 * body is never buffered; lets through whole packets within the client's rate and the ingest's capacity, and leaves
 * the rest in the socket; and answers PINGREQ itself, so that a client that has to wait is not taken for dead by
 * either side (the two directions of MQTT have no order between them, section 4.6).
 */
export function createGate(
  socket: Duplex,
  limits: GateLimits,
  {
    together,
    isPressed,
    onFault,
    onClosed,
  }: {
    /** What all gates of a broker hold together. */
    together: Together
    /** Whether nothing at all may be let through just now. */
    isPressed: () => boolean
    /** The stream cannot be read on; `chunk` is what was read last. The connection is cut afterwards. */
    onFault: (fault: ScanFault, chunk: Buffer) => void
    onClosed: () => void
  },
): Gate {
  const scanner = createPacketScanner(limits.maxPacketBytes)
  const chunks: Buffer[] = []
  /** Sizes and kinds of the complete packets in `chunks`; those before `first` have gone. */
  let sizes: number[] = []
  let kinds: Kind[] = []
  let first = 0
  let heldBytes = 0
  let phase: 'new' | 'connecting' | 'open' = 'new'
  let wanted = false
  let inFlight = 0
  let inputEnded = false
  let silenceMs = 0
  const rate = createTokenBucket(limits.packetsPerSecond, limits.burst)
  let refill: NodeJS.Timeout | undefined

  const stream = new Duplex({
    readableHighWaterMark: 64 * 1024,
    read: () => {
      wanted = true
      pump()
    },
    write: (chunk: Buffer, _encoding, done) => {
      writeThrough(chunk, done)
    },
    // Acknowledgements come as many writes of few bytes: one write of many is a tenth of the work.
    writev: (writes, done) => {
      const parts = writes.map(({ chunk }) => Buffer.from(chunk))
      writeThrough(Buffer.concat(parts), done)
    },
    destroy: (error, done) => {
      clearTimeout(refill)
      together.heldBytes -= heldBytes
      heldBytes = 0
      chunks.length = 0
      forgetSizes()
      if (error) socket.destroy()
      else hangUp(socket)
      onClosed()
      done(error)
    },
  })

  socket.on('data', take)
  socket.on('end', endInput)
  socket.on('close', endInput)
  // What made a socket fail shows in its closing; the device comes back by itself.
  socket.on('error', () => undefined)

  function take(chunk: Buffer): void {
    if (stream.destroyed) return
    silenceMs = 0
    let from = 0
    let packetStart = 0
    const fault = scanner.scan(chunk, (end, firstByte, bytes) => {
      if (firstByte === pingRequestByte && bytes === 2 && phase === 'open' && end - packetStart === 2) {
        hold(chunk.subarray(from, end - 2))
        from = end
        // A client that asks and asks and never reads gets no answer: nothing piles up for it here.
        if (socket.writableLength < maxUnreadBytes) socket.write(pingResponse)
      } else {
        sizes.push(bytes)
        kinds.push(kindOf(firstByte))
      }
      packetStart = end
    })
    if (fault) {
      onFault(fault, chunk)
      cut()
      return
    }
    hold(chunk.subarray(from))
    if (holdsTooMuch()) socket.pause()
    pump()
  }

  function hold(part: Buffer): void {
    if (part.length === 0) return
    chunks.push(part)
    heldBytes += part.length
    together.heldBytes += part.length
  }

  function holdsTooMuch(): boolean {
    return (
      heldBytes > limits.maxHeldBytes ||
      (heldBytes > limits.minHeldBytes && together.heldBytes > limits.maxHeldTogether)
    )
  }

  function pump(): void {
    if (!wanted || stream.destroyed) return
    const bytes = bytesAllowed()
    if (bytes > 0) {
      letThrough(bytes)
      if (socket.isPaused() && heldBytes < limits.minHeldBytes) socket.resume()
    } else if (inputEnded && first === sizes.length) {
      stream.push(null)
    }
  }

  /** How much of what is held may go on now: whole packets, within the client's rate and capacity. */
  function bytesAllowed(): number {
    if (phase === 'connecting' || isPressed() || first === sizes.length) return 0
    if (phase === 'new') {
      phase = 'connecting'
      return sizes[first++] ?? 0
    }
    let bytes = 0
    while (first < sizes.length && mayPass(kinds[first])) bytes += sizes[first++] ?? 0
    if (first === sizes.length) forgetSizes()
    return bytes
  }

  function mayPass(which: Kind | undefined): boolean {
    // Its end will call.
    if (which !== kind.other && inFlight >= limits.maxInFlight) return false
    if (!rate.take()) return tryAgainLater()
    if (which === kind.unacknowledged && !together.unacknowledged.take()) {
      rate.giveBack()
      return tryAgainLater()
    }
    if (which !== kind.other) inFlight++
    return true
  }

  function tryAgainLater(): false {
    refill ??= setTimeout(() => {
      refill = undefined
      pump()
    }, refillMs)
    return false
  }

  function forgetSizes(): void {
    sizes = []
    kinds = []
    first = 0
  }

  function letThrough(bytes: number): void {
    heldBytes -= bytes
    together.heldBytes -= bytes
    let left = bytes
    while (left > 0) {
      const chunk = chunks[0]
      if (!chunk) return
      if (chunk.length <= left) {
        chunks.shift()
        left -= chunk.length
        wanted = stream.push(chunk)
      } else {
        chunks[0] = chunk.subarray(left)
        wanted = stream.push(chunk.subarray(0, left))
        left = 0
      }
    }
  }

  function writeThrough(chunk: Buffer, done: () => void): void {
    if (socket.destroyed || socket.writableEnded || socket.write(chunk)) done()
    else {
      const settle = () => {
        socket.off('drain', settle)
        socket.off('close', settle)
        done()
      }
      socket.on('drain', settle)
      socket.on('close', settle)
    }
  }

  function endInput(): void {
    inputEnded = true
    pump()
  }

  function cut(): void {
    socket.destroy()
    stream.destroy()
  }

  return {
    stream,
    open: () => {
      phase = 'open'
      pump()
    },
    finished: () => {
      inFlight--
      // Below half, so that packets go on in groups rather than one by one.
      if (inFlight <= limits.maxInFlight / 2) pump()
    },
    pump,
    countSilence: (ms) => {
      // A socket that we do not read cannot be heard.
      if (!socket.isPaused()) silenceMs += ms
      return silenceMs
    },
    cut,
  }
}

function kindOf(firstByte: number): Kind {
  if (!isPublish(firstByte)) return kind.other
  return isUnacknowledged(firstByte) ? kind.unacknowledged : kind.publish
}

/** Ends a connection once what was written has gone out, but waits for nobody. */
function hangUp(socket: Duplex): void {
  if (socket.destroyed) return
  const deadline = setTimeout(() => socket.destroy(), 1000)
  socket.once('close', () => clearTimeout(deadline))
  socket.end(() => socket.destroy())
}
