import { randomBytes } from 'node:crypto'
import type { Clock } from '#shared/domain/clock.ts'
import type { Person } from '../http/mount.ts'

/** How long a ticket is good for, in milliseconds. */
export const ticketLifeMs = 30 * 1000

/** Tickets open one WebSocket each, so that no token ever stands in an address. */
export interface Tickets {
  issue: (person: Person) => string
  /** The person it was issued to; undefined when it was used before, is too old or was never issued. */
  redeem: (ticket: string) => Person | undefined
}

/** Keeps tickets in memory: whoever lost one with a restart asks for another. `clock` is real time. */
export function createTickets({ clock }: { clock: Clock }): Tickets {
  const issued = new Map<string, { person: Person; goodUntil: number }>()

  const dropOld = () => {
    // In the order of issue, which is the order in which they grow old.
    for (const [ticket, { goodUntil }] of issued) {
      if (goodUntil > clock.now()) return
      issued.delete(ticket)
    }
  }

  return {
    issue: (person) => {
      dropOld()
      const ticket = randomBytes(32).toString('base64url')
      issued.set(ticket, { person, goodUntil: clock.now() + ticketLifeMs })
      return ticket
    },
    redeem: (ticket) => {
      const entry = issued.get(ticket)
      issued.delete(ticket)
      return entry && entry.goodUntil > clock.now() ? entry.person : undefined
    },
  }
}
