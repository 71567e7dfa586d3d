// The baseline of the live benchmark: the WebSocket library alone sends a text of the same size as often to as many.
import { z } from 'zod'
import { WebSocketServer } from 'ws'

const { bytes, everyMs } = z
  .object({ bytes: z.number(), everyMs: z.number() })
  .parse(JSON.parse(process.argv[2] ?? ''))

const text = JSON.stringify({ type: 'bare', filler: 'x'.repeat(Math.max(0, Math.round(bytes) - 30)) })
const hub = new WebSocketServer({ host: '127.0.0.1', port: 0, perMessageDeflate: false })
hub.on('listening', () => {
  const { port } = z.object({ port: z.int() }).parse(hub.address())
  console.log(JSON.stringify({ httpPort: port }))
})
setInterval(() => {
  for (const socket of hub.clients) socket.send(text)
}, everyMs)
process.on('SIGTERM', () => process.exit(0))
