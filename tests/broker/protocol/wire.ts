import { connect } from 'node:net'
import type { Duplex } from 'node:stream'
import { generate, parser, type Packet } from 'mqtt-packet'

/** One connection to a broker, packet by packet. */
export interface Wire {
  /** Sends packets, or bytes as they are, in one segment. */
  send: (...parts: (Packet | Uint8Array)[]) => void
  /** The next packet that comes. Fails when the connection ends first, or nothing comes. */
  next: (withinMs?: number) => Promise<Packet>
  /** Waits until the other side has closed. @returns what came before that and was not taken by `next` */
  rest: (withinMs?: number) => Promise<Packet[]>
  /** How many packets have come and were not taken yet. */
  waiting: () => number
  /** Everything that has come, as bytes. */
  bytes: () => Buffer
  isOpen: () => boolean
  /** Cuts the connection without a word, as when the network fails. */
  cut: () => Promise<void>
}

/** How long a test waits for what must come at once, in ms; a busy machine is given time. */
const patienceMs = 5_000

/** Opens a TCP connection. */
export function openWire(port: number): Wire {
  return wireOver(connect({ port, host: '127.0.0.1', noDelay: true }))
}

/** A wire over any stream, such as a WebSocket's. */
export function wireOver(stream: Duplex): Wire {
  const received: Buffer[] = []
  const packets: Packet[] = []
  let open = true
  let fault: Error | undefined
  let wake: () => void = () => undefined
  const reader = parser({ protocolVersion: 4 })
  reader.on('packet', (packet) => {
    packets.push(packet)
    wake()
  })
  reader.on('error', (error: Error) => {
    fault = error
    wake()
  })
  stream.on('data', (chunk: Buffer) => {
    received.push(chunk)
    reader.parse(chunk)
  })
  stream.on('error', () => undefined)
  const closed = new Promise<void>((resolve) =>
    stream.once('close', () => {
      open = false
      wake()
      resolve()
    }),
  )

  async function until(isSo: () => boolean, withinMs: number, what: string): Promise<void> {
    const deadline = performance.now() + withinMs
    while (!isSo()) {
      if (fault) throw new Error(`The broker sent what is no packet: ${fault.message}`)
      const leftMs = deadline - performance.now()
      if (leftMs <= 0) throw new Error(`${what} within ${withinMs} ms; came: ${describe(packets)}`)
      let timer: NodeJS.Timeout | undefined
      await new Promise<void>((resolve) => {
        wake = resolve
        timer = setTimeout(resolve, leftMs)
      })
      clearTimeout(timer)
    }
  }

  return {
    send: (...parts) => {
      stream.write(Buffer.concat(parts.map((part) => (part instanceof Uint8Array ? part : generate(part)))))
    },
    next: async (withinMs = patienceMs) => {
      await until(() => packets.length > 0 || !open, withinMs, 'No packet came')
      const packet = packets.shift()
      if (!packet) throw new Error('The broker closed the connection where a packet was expected')
      return packet
    },
    rest: async (withinMs = patienceMs) => {
      await until(() => !open, withinMs, 'The broker did not close the connection')
      return packets.splice(0)
    },
    waiting: () => packets.length,
    bytes: () => Buffer.concat(received),
    isOpen: () => open,
    cut: async () => {
      stream.destroy()
      await closed
    },
  }
}

function describe(packets: Packet[]): string {
  return packets.length === 0 ? 'nothing' : packets.map(({ cmd }) => cmd).join(', ')
}
