import { z } from 'zod'
import { BoxPlan } from './plan.ts'

/** What the process of the boxes is asked to do. */
export const FleetOrder = z.discriminatedUnion('do', [
  z.object({ do: z.literal('begin'), port: z.int(), seed: z.string(), boxes: z.array(BoxPlan) }),
  z.object({ do: z.literal('counts') }),
  /** Answered with the time of the next acknowledgement. */
  z.object({ do: z.literal('next-acknowledgement') }),
  /** From now on delays are those of messages that fall due from now on. */
  z.object({ do: z.literal('measure') }),
  z.object({ do: z.literal('delays') }),
  /** Nothing more falls due; answered when everything is acknowledged. */
  z.object({ do: z.literal('finish') }),
  z.object({ do: z.literal('quit') }),
])
export type FleetOrder = z.infer<typeof FleetOrder>

export const FleetCounts = z.object({
  /** Milliseconds since 1970 UTC. */
  atMs: z.number(),
  boxes: z.int(),
  connected: z.int(),
  due: z.int(),
  sent: z.int(),
  acknowledged: z.int(),
  sentAgain: z.int(),
  lost: z.int(),
  turnedAway: z.int(),
  overtaken: z.int(),
  pings: z.int(),
  longestPingMs: z.number(),
  /** When the last of the boxes was first connected; null until then. Milliseconds since 1970 UTC. */
  allConnectedAtMs: z.number().nullable(),
})
export type FleetCounts = z.infer<typeof FleetCounts>

/** From due to PUBACK, in ms; what still waits counts with its age. */
export const Delays = z.object({
  count: z.int(),
  median: z.number(),
  p99: z.number(),
  longest: z.number(),
  /** Of those, not acknowledged yet. */
  waiting: z.int(),
})
export type Delays = z.infer<typeof Delays>

/** How many messages of each box fell due, in the order of the plan. */
export const Finished = z.object({ due: z.array(z.int()) })

export const Numbered = z.object({ id: z.int(), order: FleetOrder })
export const Answer = z.object({ id: z.int(), result: z.unknown() })
