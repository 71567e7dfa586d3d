// Publishes the load that its only argument describes, in a process of its own, and prints what came of it.
import { z } from 'zod'
import { publishLoad } from './raw-publisher.ts'

const Load = z.object({
  port: z.int(),
  devices: z.array(z.object({ username: z.string(), secret: z.string(), topic: z.string() })),
  readings: z.union([z.literal(1), z.literal(6)]),
  window: z.int(),
  perSecond: z.number(),
  warmUpMs: z.number(),
  measureMs: z.number(),
})

const result = await publishLoad(Load.parse(JSON.parse(process.argv[2] ?? '')))
console.log(JSON.stringify(result))
process.exit(0)
