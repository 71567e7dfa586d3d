// The broker's library alone, in a process of its own: everyone may come in, and the handler of each message does
// nothing. Prints its port.
import { createServer } from 'node:net'
import { Aedes } from 'aedes'
import { z } from 'zod'

const aedes = await Aedes.createBroker({
  concurrency: 0,
  authorizePublish: (_client, _packet, done) => done(null),
})
const server = createServer({ noDelay: true }, aedes.handle)
server.listen(0, '127.0.0.1', () => {
  console.log(JSON.stringify(z.object({ port: z.int() }).parse(server.address())))
})
process.on('SIGTERM', () => process.exit(0))
