import { z } from 'zod'

const Member = z.object({
  username: z.string(),
  secret: z.string(),
  topic: z.string(),
  statusTopic: z.string(),
})

export const CrowdPlan = z.discriminatedUnion('kind', [
  /** Each sends readings at QoS 0 as quickly as the server reads them. */
  z.object({ kind: z.literal('flood'), port: z.int(), members: z.array(Member) }),
  /** So many connections: most signed in and idle, some in the middle of a packet, some that never say a word. */
  z.object({ kind: z.literal('idle'), port: z.int(), members: z.array(Member), connections: z.int() }),
  /**
   * Subscribers that never read what is published to them: each member publishes large packs of its own, to its own
   * `listeners` connections.
   */
  z.object({ kind: z.literal('deaf-devices'), port: z.int(), members: z.array(Member), listeners: z.int() }),
  /** Pages that never read: WebSockets in the site's room, of which some ask for the whole state again and again. */
  z.object({
    kind: z.literal('deaf-pages'),
    url: z.string(),
    path: z.string(),
    site: z.string(),
    tickets: z.array(z.string()),
    asking: z.int(),
  }),
])
export type CrowdPlan = z.infer<typeof CrowdPlan>
export type CrowdMember = z.infer<typeof Member>

/** Told twice a second. */
export const CrowdCounts = z.object({
  ready: z.boolean(),
  connected: z.int(),
  lost: z.int(),
  /** Messages handed to the sockets. */
  sent: z.int(),
})
export type CrowdCounts = z.infer<typeof CrowdCounts>
