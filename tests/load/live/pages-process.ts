// Many pages in one process: each opens its socket, enters the site's room and notes how old readings are when they come.
import { once } from 'node:events'
import { WebSocket } from 'ws'
import { z } from 'zod'
import { livePath, ServerMessage, type ClientMessage } from '#shared/contract/live.ts'
import { systemClock } from '#shared/domain/clock.ts'

const { port, pages, tickets, site, warmUpMs, measureMs } = z
  .object({
    port: z.int(),
    pages: z.int(),
    tickets: z.array(z.string()).nullable(),
    site: z.string(),
    warmUpMs: z.number(),
    measureMs: z.number(),
  })
  .parse(JSON.parse(process.argv[2] ?? ''))

/** Reading every frame at every page would take the processor from what is measured. */
const everyPage = 10
const delays: number[] = []
let bytes = 0
let frames = 0
let measuring = false

const sockets = await Promise.all(Array.from({ length: pages }, (_, index) => open(index)))
console.log('ready')
await pause(warmUpMs)
measuring = true
await pause(measureMs)
measuring = false
delays.sort((one, other) => one - other)
const at = (share: number) => delays[Math.min(delays.length - 1, Math.floor(delays.length * share))] ?? null
console.log(JSON.stringify({ bytes, frames, readings: delays.length, medianMs: at(0.5), p99Ms: at(0.99) }))
for (const socket of sockets) socket.terminate()

async function open(index: number): Promise<WebSocket> {
  const socket = new WebSocket(`ws://127.0.0.1:${port}${livePath}`, { perMessageDeflate: false })
  await once(socket, 'open')
  const say = (message: ClientMessage) => socket.send(JSON.stringify(message))
  let welcome = tickets === null
  socket.on('message', (data: Buffer) => {
    if (!welcome) {
      welcome = true
      say({ type: 'subscribe', site })
    }
    if (!measuring) return
    bytes += data.length
    frames += 1
    if (tickets !== null && index % everyPage === 0) note(data)
  })
  const ticket = tickets?.[index]
  if (ticket !== undefined) say({ type: 'hello', ticket })
  return socket
}

function note(data: Buffer): void {
  const now = systemClock.now()
  const message = ServerMessage.parse(JSON.parse(data.toString()))
  if (message.type !== 'delta') return
  for (const [, measuredAt] of message.changes.readings ?? []) delays.push(now - measuredAt)
}

function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms))
}
