import type { LiveChanges } from '#shared/contract/live.ts'
import type { Tonight } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { createTitle } from './title.ts'
import { createGatheredChanges } from './gathered-changes.ts'

/** A socket as a room sees it. */
export interface Member {
  send(text: string): void
  /** Bytes that were sent and have not gone out. */
  waitingBytes(): number
  /** Told when it has been too slow for too long. */
  onTooSlow(): void
  /** Told when its snapshot cannot be read just now. */
  onNoSnapshot(): void
}

export interface RoomOptions {
  site: string
  epoch: string
  clock: Clock
  snapshotOf: (siteSlug: string) => Promise<Tonight>
  /** The least time between two frames, in ms. */
  frameMs: number
  /** Beyond this a member gets no frames until it has caught up, in bytes. */
  maxWaitingBytes: number
  /** For how long it may be behind, in ms. */
  maxBehindMs: number
  onError: (error: unknown) => void
}

export interface Room {
  join(member: Member): void
  leave(member: Member): void
  /** A member that nobody sees gets nothing but what changes its title; seen again, the whole state. */
  attend(member: Member, visible: boolean): void
  /** Sends a member the whole state again. */
  refresh(member: Member): void
  add(changes: LiveChanges): void
  size(): number
  close(): void
}

/** Where a member stands. */
interface Place {
  /**
   * `waiting` for a snapshot, with the frames that came meanwhile; `behind` until it has read what it was sent;
   * `hidden` while nobody sees it.
   */
  state: 'live' | 'waiting' | 'behind' | 'hidden'
  frames: string[]
  behindMs: number
}

/** Time for the changes of one batch to come together before the first frame after a silence, in ms. */
const gatherMs = 10

/**
 * The room of a site. Frames are stringified once for all and numbered. A snapshot carries the number of the last frame
 * before its reading began; every frame after that follows it. What was committed is in one or the other or both, and
 * since whole objects replace those before, twice does no harm: no hole, and no double.
 */
export function createRoom(options: RoomOptions): Room {
  const { site, epoch, clock, snapshotOf, frameMs } = options
  const members = new Map<Member, Place>()
  const gathered = createGatheredChanges()
  const title = createTitle(site, clock)
  let seq = 0
  let timer: NodeJS.Timeout | undefined
  let resting = false
  let reading = false
  let readAgain = false

  function add(changes: LiveChanges): void {
    // Nobody listens: whoever joins reads the state itself.
    if (members.size === 0) return
    title.note(changes)
    gathered.add(changes)
    if (!resting && !gathered.isEmpty()) timer ??= setTimeout(sendFrame, gatherMs)
  }

  function sendFrame(): void {
    timer = undefined
    resting = false
    if (!gathered.isEmpty()) {
      seq++
      const frame = { type: 'delta', site, epoch, seq, sentAt: clock.now(), changes: gathered.take() }
      const text = JSON.stringify(frame)
      for (const [member, place] of members) deliver(member, place, text)
      sendTitle()
      rest()
    } else if ([...members.values()].some(({ state }) => state === 'behind')) {
      for (const [member, place] of members) if (place.state === 'behind') lookAfter(member, place)
      rest()
    }
  }

  function sendTitle(): void {
    const text = title.ifNew()
    if (text === undefined) return
    for (const [member, { state }] of members) if (state === 'hidden') member.send(text)
  }

  function rest(): void {
    resting = true
    timer = setTimeout(sendFrame, frameMs)
  }

  function deliver(member: Member, place: Place, text: string): void {
    if (place.state === 'hidden') return
    if (place.state === 'waiting') place.frames.push(text)
    else if (place.state === 'behind') lookAfter(member, place)
    else if (member.waitingBytes() > options.maxWaitingBytes) {
      place.state = 'behind'
      place.behindMs = 0
    } else member.send(text)
  }

  /** A member that is behind gets the whole state once it has read what it was sent; or is given up. */
  function lookAfter(member: Member, place: Place): void {
    place.behindMs += frameMs
    if (member.waitingBytes() === 0) refresh(member)
    else if (place.behindMs > options.maxBehindMs) member.onTooSlow()
  }

  function refresh(member: Member): void {
    const place = members.get(member)
    if (!place) return
    if (place.state === 'hidden') {
      // It asks whether anybody is there.
      member.send(title.text())
      return
    }
    askFor(member)
  }

  function attend(member: Member, visible: boolean): void {
    const place = members.get(member)
    if (!place || (place.state === 'hidden') === !visible) return
    if (visible) askFor(member)
    else members.set(member, { state: 'hidden', frames: [], behindMs: 0 })
  }

  function askFor(member: Member): void {
    if (member.waitingBytes() > options.maxWaitingBytes) {
      // It has not read what it was sent: another snapshot on top would only fill the memory.
      if (members.get(member)?.state !== 'behind')
        members.set(member, { state: 'behind', frames: [], behindMs: 0 })
      if (timer === undefined) rest()
      return
    }
    members.set(member, { state: 'waiting', frames: [], behindMs: 0 })
    // Who comes while a snapshot is being read needs one that is read later; all of them share it.
    if (reading) readAgain = true
    else void sendSnapshot()
  }

  async function sendSnapshot(): Promise<void> {
    reading = true
    const waiting = [...members].filter(([, { state }]) => state === 'waiting')
    const seqBefore = seq
    // What came while another snapshot was being read is older than this one.
    for (const [, place] of waiting) place.frames = []
    title.beginRead()
    try {
      const tonight = await snapshotOf(site)
      title.know(tonight)
      const text = JSON.stringify({ type: 'snapshot', site, epoch, seq: seqBefore, tonight })
      for (const [member, place] of waiting) if (members.get(member) === place) bringUp(member, place, text)
    } catch (error) {
      options.onError(error)
      for (const [member, place] of waiting) if (members.get(member) === place) member.onNoSnapshot()
    }
    reading = false
    if (readAgain) {
      readAgain = false
      void sendSnapshot()
    }
  }

  function bringUp(member: Member, place: Place, snapshot: string): void {
    member.send(snapshot)
    for (const frame of place.frames) member.send(frame)
    members.set(member, { state: 'live', frames: [], behindMs: 0 })
  }

  return {
    join: (member) => {
      members.set(member, { state: 'waiting', frames: [], behindMs: 0 })
      refresh(member)
    },
    leave: (member) => {
      members.delete(member)
      if (members.size === 0) gathered.take()
    },
    attend,
    refresh,
    add,
    size: () => members.size,
    close: () => {
      clearTimeout(timer)
      members.clear()
    },
  }
}
