import { Duplex } from 'node:stream'
import { hangUp, writeThrough } from './carrier.ts'
import { createHeldPackets } from './held-packets.ts'
import { isPublishKind, kindOf, packetKind, type PacketKind } from './packet-kind.ts'
import { createPacketScanner, type ScanFault } from './packet-scanner.ts'
import type { PlainPublish } from './plain-publish.ts'
import type { Shortcut } from './shortcut.ts'
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
  /** Of a PUBLISH that counts as large, in bytes: a pack that was kept through an outage. */
  largeBytes: number
  /** Large ones let through and not finished yet: so the clients take turns. */
  maxLargeInFlight: number
  /** Packets let through a second in the long run, and at once after a silence. */
  packetsPerSecond: number
  burst: number
  /** Time for CONNECT to arrive whole, in ms. */
  connectTimeoutMs: number
}

/** A frame of a carrier that is larger than what may be held; it was refused before it was read. */
export class FrameTooLarge extends Error {
  constructor(readonly fault: ScanFault) {
    super('A frame is too large.')
  }
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
  /** What waits to be read by the client, in bytes. */
  unreadBytes(): number
  /** Whether its last packet was DISCONNECT. */
  saidGoodbye(): boolean
  /** Cuts the connection without waiting for anything. */
  cut(): void
}

/** What the gates of a broker share. */
export interface Together {
  heldBytes: number
  /** Limits PUBLISH at QoS 0 of all clients: whoever sends at QoS 1 is slowed by waiting for acknowledgements. */
  unacknowledged: TokenBucket
}

const pingResponse = Uint8Array.from([0xd0, 0])
const pingRequestByte = 0xc0
const disconnectByte = 0xe0
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
    admit,
    shortcut,
    onFault,
    onClosed,
  }: {
    /** What all gates of a broker hold together. */
    together: Together
    /** Whether nothing at all may be let through just now, or nothing large. */
    isPressed: (large: boolean) => boolean
    /** Asks for the turn of a CONNECT that has arrived; without it, it goes at once. */
    admit?: ((go: () => void) => void) | undefined
    /** Where the packets go that need not go through the stream. */
    shortcut?: Shortcut | undefined
    /** The stream cannot be read on; `chunk` is what was read last. The connection is cut afterwards. */
    onFault: (fault: ScanFault, chunk: Buffer) => void
    onClosed: (error: Error | null) => void
  },
): Gate {
  const scanner = createPacketScanner(limits.maxPacketBytes)
  const held = createHeldPackets(together)
  let phase: 'new' | 'connecting' | 'open' = 'new'
  let wanted = false
  let inFlight = 0
  /** Those of them that went through the stream. */
  let inStream = 0
  let largeInFlight = 0
  /** From its first SUBSCRIBE on, a client may be waiting for what it sends itself. */
  let listens = false
  let inputEnded = false
  let silenceMs = 0
  let pumping = false
  let turn: 'unasked' | 'asked' | 'come' = admit ? 'unasked' : 'come'
  let goodbye = false
  const rate = createTokenBucket(limits.packetsPerSecond, limits.burst)
  let refill: NodeJS.Timeout | undefined
  const patience = setTimeout(cut, limits.connectTimeoutMs)

  const stream = new Duplex({
    readableHighWaterMark: 64 * 1024,
    read: () => {
      wanted = true
      pump()
    },
    write: (chunk: Buffer, _encoding, done) => {
      writeThrough(socket, chunk, done)
    },
    // Acknowledgements come as many writes of few bytes: one write of many is a tenth of the work.
    writev: (writes, done) => {
      const parts = writes.map(({ chunk }) => Buffer.from(chunk))
      writeThrough(socket, Buffer.concat(parts), done)
    },
    destroy: (error, done) => {
      clearTimeout(refill)
      clearTimeout(patience)
      held.clear()
      if (error) socket.destroy()
      else hangUp(socket)
      onClosed(error)
      done(error)
    },
  })

  stream.on('drain', pump)
  socket.on('data', take)
  socket.on('end', endInput)
  socket.on('close', endInput)
  // What made a socket fail shows in its closing; the device comes back by itself.
  socket.on('error', (error) => {
    if (error instanceof FrameTooLarge && !stream.destroyed) onFault(error.fault, Buffer.alloc(0))
  })

  function take(chunk: Buffer): void {
    if (stream.destroyed) return
    silenceMs = 0
    let from = 0
    let packetStart = 0
    const fault = scanner.scan(chunk, (end, firstByte, bytes) => {
      if (firstByte === pingRequestByte && bytes === 2 && phase === 'open' && end - packetStart === 2) {
        held.hold(chunk.subarray(from, end - 2))
        from = end
        // A client that asks and asks and never reads gets no answer: nothing piles up for it here.
        if (socket.writableLength < maxUnreadBytes) socket.write(pingResponse)
      } else {
        held.note(bytes, kindOf(firstByte))
        goodbye = firstByte === disconnectByte
      }
      packetStart = end
    })
    if (fault) {
      onFault(fault, chunk)
      cut()
      return
    }
    held.hold(chunk.subarray(from))
    if (held.count() > 0) clearTimeout(patience)
    if (holdsTooMuch()) socket.pause()
    pump()
  }

  function holdsTooMuch(): boolean {
    const bytes = held.bytes()
    return (
      bytes > limits.maxHeldBytes ||
      (bytes > limits.minHeldBytes && together.heldBytes > limits.maxHeldTogether)
    )
  }

  function pump(): void {
    if (stream.destroyed || pumping) return
    pumping = true
    const before = held.count()
    held.take(passWhatMay(), (part) => (wanted = stream.push(part)))
    pumping = false
    const passed = held.count() !== before
    if (passed && socket.isPaused() && held.bytes() < limits.minHeldBytes) socket.resume()
    if (!passed && wanted && inputEnded && held.count() === 0) stream.push(null)
  }

  /**
   * Walks what is held as far as it may go now: whole packets, within the client's rate and capacity.
   * @returns the bytes of those that are to go into the stream
   */
  function passWhatMay(): number {
    let bytes = 0
    while (held.count() > 0 && phase !== 'connecting') {
      const size = held.size()
      const which = held.kind()
      if (phase === 'new') {
        if (!wanted || !mayConnect()) break
        phase = 'connecting'
        held.advance()
        return size
      }
      const large = size > limits.largeBytes && isPublishKind(which)
      if (isPressed(large) || (large && largeInFlight >= limits.maxLargeInFlight)) break
      const short = bytes === 0 ? readShort(which) : undefined
      if (short ? stream.writableNeedDrain : !wanted || mustWait(which)) break
      if (!mayPass(which)) break
      held.advance()
      if (short && shortcut) {
        held.discard(size)
        if (large) largeInFlight++
        shortcut.take(short, large ? finishedLarge : finishedOne)
      } else {
        bytes += size
        if (isPublishKind(which)) inStream++
        else if (which === packetKind.subscribe) listens = true
      }
    }
    return bytes
  }

  /** Also while nothing else may pass: who is connected is answered its pings, and waits in peace. */
  function mayConnect(): boolean {
    if (turn === 'unasked') {
      turn = 'asked'
      admit?.(() => {
        turn = 'come'
        // Asked from within a pump, the answer may come at once.
        if (!pumping) pump()
      })
    }
    return turn === 'come'
  }

  /** What the packet at the head brings, if it may take the shortcut: overtaking nothing that is under way. */
  function readShort(which: PacketKind): PlainPublish | undefined {
    if (!shortcut || listens || inStream > 0 || !isPublishKind(which)) return undefined
    const { chunk, from, end } = held.join()
    return shortcut.read(chunk, from, end)
  }

  /** The other way round: acknowledgements go out in the order of the messages [MQTT-4.6.0-2]. */
  function mustWait(which: PacketKind): boolean {
    return isPublishKind(which) && shortcut !== undefined && shortcut.waiting() > 0
  }

  function mayPass(which: PacketKind): boolean {
    // Its end will call.
    if (isPublishKind(which) && inFlight >= limits.maxInFlight) return false
    if (!rate.take()) return tryAgainLater()
    if (which === packetKind.unacknowledged && !together.unacknowledged.take()) {
      rate.giveBack()
      return tryAgainLater()
    }
    if (isPublishKind(which)) inFlight++
    return true
  }

  function tryAgainLater(): false {
    refill ??= setTimeout(() => {
      refill = undefined
      pump()
    }, refillMs)
    return false
  }

  function finishedLarge(): void {
    largeInFlight--
    finishedOne()
  }

  function finishedOne(): void {
    inFlight--
    // Below half, so that packets go on in groups rather than one by one.
    if (inFlight <= limits.maxInFlight / 2) pump()
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
      inStream--
      finishedOne()
    },
    pump,
    countSilence: (ms) => {
      // A socket that we do not read cannot be heard.
      if (!socket.isPaused()) silenceMs += ms
      return silenceMs
    },
    unreadBytes: () => stream.writableLength + socket.writableLength,
    saidGoodbye: () => goodbye,
    cut,
  }
}
