import { describe, expect, test } from 'vitest'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import type { Tonight } from '#shared/contract/site.ts'
import { createRoom, type Member } from '../../server/live/room.ts'
import { eventually } from '../broker/devices.ts'

const Message = z.discriminatedUnion('type', [
  z.object({
    type: z.literal('snapshot'),
    seq: z.number(),
    tonight: z.object({ latest: z.array(z.unknown()) }),
  }),
  z.object({
    type: z.literal('delta'),
    seq: z.number(),
    changes: z.object({ readings: z.array(z.tuple([z.number(), z.number(), z.number()])) }),
  }),
])

/** A member whose line can be held up. */
function makeMember() {
  const texts: string[] = []
  let stuck = false
  let waiting = 0
  let given = 0
  let failed = 0
  const member: Member = {
    send: (text) => {
      texts.push(text)
      if (stuck) waiting += text.length
    },
    waitingBytes: () => waiting,
    onTooSlow: () => given++,
    onNoSnapshot: () => failed++,
  }
  return {
    member,
    messages: () => texts.map((text) => Message.parse(JSON.parse(text))),
    stick: () => (stuck = true),
    drain: () => {
      stuck = false
      waiting = 0
    },
    wasGivenUp: () => given,
    failures: () => failed,
  }
}

/** A room over a state of one number, whose snapshots take as long as one wants. */
function makeRoom(options: { snapshotMs?: number; maxWaitingBytes?: number; maxBehindMs?: number } = {}) {
  let state = 0
  let reads = 0
  let broken = false
  const room = createRoom({
    site: 'quarry-road',
    epoch: 'this one',
    clock: systemClock,
    frameMs: 20,
    maxWaitingBytes: options.maxWaitingBytes ?? 1_000,
    maxBehindMs: options.maxBehindMs ?? 60_000,
    onError: () => undefined,
    snapshotOf: async () => {
      reads++
      await new Promise((resolve) => setTimeout(resolve, (options.snapshotMs ?? 0) / 2))
      const read = state
      await new Promise((resolve) => setTimeout(resolve, (options.snapshotMs ?? 0) / 2))
      if (broken) throw new Error('The database is away.')
      return tonight(read)
    },
  })
  return {
    room,
    /** Commits the next number, then says so. */
    change: () => {
      state++
      room.add({ readings: [[1, state, state]] })
      return state
    },
    reads: () => reads,
    breakDown: () => (broken = true),
  }
}

/** What a client that applies snapshot and frames has seen: the numbers, in order. */
function numbersOf(messages: z.infer<typeof Message>[]): number[] {
  return messages.flatMap((message) =>
    message.type === 'snapshot'
      ? message.tonight.latest.map((latest) => z.object({ c: z.number() }).parse(latest).c)
      : message.changes.readings.map(([, , c]) => c),
  )
}

describe('snapshot and frames', () => {
  test.each([0, 10, 35, 80])('have no hole between them when a snapshot takes %d ms', async (snapshotMs) => {
    const { room, change } = makeRoom({ snapshotMs })
    const first = makeMember()
    room.join(first.member)
    await eventually(first.messages, (messages) => messages.length > 0)
    const changing = setInterval(change, 3)
    const late = await Promise.all(
      Array.from({ length: 20 }, async (_, index) => {
        await new Promise((resolve) => setTimeout(resolve, index * 9))
        const one = makeMember()
        room.join(one.member)
        return one
      }),
    )
    await new Promise((resolve) => setTimeout(resolve, 200))
    clearInterval(changing)
    const last = change()
    for (const { messages } of late) {
      await eventually(messages, (all) => numbersOf(all).at(-1) === last)
      const [snapshot, ...frames] = messages()
      expect(snapshot?.type).toBe('snapshot')
      // Frames follow the snapshot's number without a hole and without one twice.
      const seqs = frames.map(({ seq }) => seq)
      expect(seqs).toEqual(seqs.map((_, index) => (snapshot?.seq ?? NaN) + 1 + index))
      // Each number after the snapshot's is told; some before it may be told again.
      const [state = NaN, ...told] = numbersOf(messages())
      const after = told.filter((number) => number > state)
      expect(after).toEqual(Array.from({ length: last - state }, (_, index) => state + 1 + index))
    }
    room.close()
  })

  test('a storm of members shares one reading, or two', async () => {
    const { room, reads } = makeRoom({ snapshotMs: 20 })
    const storm = Array.from({ length: 200 }, makeMember)
    for (const { member } of storm) room.join(member)
    for (const { messages } of storm) await eventually(messages, (all) => all.length === 1)
    expect(reads()).toBeLessThanOrEqual(2)
    room.close()
  })

  test('a snapshot that cannot be read is told, not waited for', async () => {
    const { room, breakDown } = makeRoom()
    breakDown()
    const one = makeMember()
    room.join(one.member)
    await eventually(one.failures, (count) => count === 1)
    room.close()
  })
})

describe('a member that reads too slowly', () => {
  test('gets no frames while it is behind, then one snapshot, then frames again; the others notice nothing', async () => {
    const { room, change } = makeRoom({ maxWaitingBytes: 300 })
    const slow = makeMember()
    const quick = makeMember()
    room.join(slow.member)
    room.join(quick.member)
    await eventually(quick.messages, (messages) => messages.length === 1)
    await eventually(slow.messages, (messages) => messages.length === 1)

    slow.stick()
    for (let index = 0; index < 25; index++) {
      change()
      await new Promise((resolve) => setTimeout(resolve, 22))
    }
    const stuckWith = slow.messages().length
    expect(stuckWith).toBeLessThan(8)
    expect(quick.messages().length).toBeGreaterThan(15)

    slow.drain()
    const last = change()
    await eventually(slow.messages, (messages) => numbersOf(messages).at(-1) === last)
    expect(slow.messages()[stuckWith]?.type).toBe('snapshot')
    const then = change()
    await eventually(slow.messages, (messages) => numbersOf(messages).at(-1) === then)
    expect(slow.messages().at(-1)?.type).toBe('delta')
    expect(numbersOf(quick.messages())).toEqual([0, ...Array.from({ length: then }, (_, index) => index + 1)])
    room.close()
  })

  test('gets no snapshot on top of what it has not read, however often it asks', async () => {
    const { room, reads } = makeRoom({ maxWaitingBytes: 300 })
    const deaf = makeMember()
    room.join(deaf.member)
    await eventually(deaf.messages, (messages) => messages.length === 1)
    deaf.stick()
    for (let index = 0; index < 30; index++) {
      room.refresh(deaf.member)
      await new Promise((resolve) => setTimeout(resolve, 5))
    }
    expect(deaf.messages().length).toBeLessThan(5)
    const before = reads()
    deaf.drain()
    // It is looked after without a change in the room.
    await eventually(reads, (count) => count === before + 1)
    room.close()
  })

  test('is given up when it never reads again, although nothing more changes', async () => {
    const { room, change } = makeRoom({ maxWaitingBytes: 300, maxBehindMs: 100 })
    const dead = makeMember()
    room.join(dead.member)
    await eventually(dead.messages, (messages) => messages.length === 1)
    dead.stick()
    for (let index = 0; index < 8; index++) {
      change()
      await new Promise((resolve) => setTimeout(resolve, 22))
    }
    await eventually(dead.wasGivenUp, (count) => count > 0)
    room.close()
  })
})

function tonight(c: number): Tonight {
  const at = new Date(0).toISOString()
  return {
    site: { id: 1, slug: 'quarry-road', name: 'Quarry Road', timeZone: 'America/Chicago', elevationM: 210 },
    now: at,
    services: [],
    cookers: [],
    pieces: [],
    devices: [],
    latest: [{ channelId: 1, at, c }],
    forecasts: [],
  }
}
