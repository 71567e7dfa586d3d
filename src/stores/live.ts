import { useEventListener } from '@vueuse/core'
import { defineStore } from 'pinia'
import { computed, onScopeDispose, shallowRef, toRef, toValue, watch, type MaybeRefOrGetter } from 'vue'
import { ApiProblem } from '@/api/api-problem.ts'
import { pageRandom } from '@/api/chance.ts'
import { call } from '@/api/client.ts'
import type { ReadingTuple, ServerMessage } from '@/shared/contract/live.ts'
import { readingEndpoints } from '@/shared/contract/reading.ts'
import { sessionEndpoints } from '@/shared/contract/session.ts'
import { nextStep } from '@/shared/domain/next-step.ts'
import { createLiveConnection } from './live-connection.ts'
import { openSocket } from './open-socket.ts'
import { freshness, gapMsOf } from './live-freshness.ts'
import { applyChanges, sequence, tonightFrom, type Place } from './live-reducer.ts'
import { extendTraces, traceSpanMs, tracesFrom } from './live-traces.ts'
import type { LiveRoom, LiveSite } from './live-types.ts'
import { usePresent } from './present.ts'

/** A room stays joined this long after the last page that shows it was left. */
const lingerMs = 20_000
/** Lines that could not be loaded are asked for again after this long. */
const tracesAgainMs = 5000
/** A page that is hidden for less than this is as good as seen. */
const hiddenAfterMs = 10_000
/** Half a minute a point over twelve hours. */
const tracePoints = 1440

interface Room extends LiveRoom {
  pages: number
  place: Place | null
  /** A snapshot was asked for and has not come: deltas until then are of no use. */
  awaiting: boolean
  /** Readings that came while the lines were being loaded; null when none are. */
  meanwhile: ReadingTuple[] | null
  /** Frames were missed while the lines were being loaded: once they are there, they are loaded again. */
  outdated: boolean
  cancelLeave: (() => void) | null
}

/** The socket and what it tells, by site. Pages use `useLive(site)`. */
export const useLiveStore = defineStore('live', () => {
  const present = usePresent()
  const rooms = new Map<string, Room>()
  /** As the server knows it. */
  let seen = true
  let cancelHiding: () => void = () => undefined

  const connection = createLiveConnection(
    {
      openSocket,
      ticket: async () => (await call(sessionEndpoints.liveTicket)).ticket,
      isFinal: (error) => error instanceof ApiProblem && error.kind === 'signed-out',
      random: pageRandom(),
      later,
      onMessage: hear,
      onUp: () => {
        if (!seen) connection.send({ type: 'attention', visible: false })
        for (const room of rooms.values()) subscribe(room)
      },
      onDown: () => {
        for (const room of rooms.values()) {
          if (room.connection.value !== 'refused') room.connection.value = 'reconnecting'
        }
      },
    },
    () => {
      const [first] = rooms.keys()
      return first === undefined ? null : { type: 'snapshot', site: first }
    },
  )

  // A phone that wakes or finds the network again does not wait for its turn.
  useEventListener(window, 'online', () => rooms.size > 0 && connection.open())
  const lookWhetherSeen = () => {
    cancelHiding()
    if (document.visibilityState === 'hidden') {
      cancelHiding = later(() => attend(false), hiddenAfterMs)
      return
    }
    attend(true)
    if (rooms.size > 0) connection.open()
  }
  useEventListener(document, 'visibilitychange', lookWhetherSeen)
  // It may have been opened behind another.
  lookWhetherSeen()

  /** Nobody sees the page, or somebody does again: then the server sends the state as it is by now. */
  function attend(visible: boolean): void {
    if (seen === visible) return
    seen = visible
    const told = connection.send({ type: 'attention', visible })
    if (visible && told) for (const room of rooms.values()) room.awaiting = true
  }

  function join(site: string): Room {
    const room = rooms.get(site) ?? newRoom(site)
    room.pages += 1
    room.cancelLeave?.()
    room.cancelLeave = null
    if (!rooms.has(site)) {
      rooms.set(site, room)
      if (!subscribe(room)) connection.open()
    }
    return room
  }

  function leave(site: string): void {
    const room = rooms.get(site)
    if (room === undefined) return
    room.pages -= 1
    if (room.pages > 0) return
    room.cancelLeave = later(() => {
      rooms.delete(site)
      connection.send({ type: 'unsubscribe', site })
    }, lingerMs)
  }

  /** Forgets everything: someone signed out. */
  function stop(): void {
    connection.close()
    for (const room of rooms.values()) {
      room.cancelLeave?.()
      room.tonight.value = null
      room.traces.value = new Map()
      room.next.value = null
      room.place = null
      room.connection.value = 'connecting'
    }
    rooms.clear()
  }

  function subscribe(room: Room): boolean {
    room.awaiting = true
    return connection.send({ type: 'subscribe', site: room.site })
  }

  function hear(message: ServerMessage): void {
    if (message.type === 'welcome') return
    const room = message.site === undefined ? undefined : rooms.get(message.site)
    if (room === undefined) return
    if (message.type === 'refused') room.connection.value = 'refused'
    else if (message.type === 'title') room.next.value = message.next
    else if (message.type === 'snapshot') takeSnapshot(room, message)
    else takeDelta(room, message)
  }

  function takeSnapshot(room: Room, message: Extract<ServerMessage, { type: 'snapshot' }>): void {
    const { epoch, seq, tonight } = message
    present.learn(Date.parse(tonight.now))
    const complete = room.place?.epoch === epoch && room.place.seq === seq && room.traces.value.size > 0
    room.place = { epoch, seq }
    room.awaiting = false
    room.tonight.value = tonightFrom(tonight, room.tonight.value)
    room.connection.value = 'live'
    renewNext(room)
    if (!complete) void loadTraces(room)
  }

  function takeDelta(room: Room, message: Extract<ServerMessage, { type: 'delta' }>): void {
    if (room.awaiting || room.tonight.value === null) return
    const step = sequence(room.place, message)
    if (step === 'ignore') return
    if (step === 'missed') {
      room.awaiting = connection.send({ type: 'snapshot', site: room.site })
      return
    }
    present.learn(message.sentAt)
    room.place = { epoch: message.epoch, seq: message.seq }
    room.tonight.value = applyChanges(room.tonight.value, message.changes)
    const { readings, pieces, forecasts } = message.changes
    if (pieces !== undefined || forecasts !== undefined) renewNext(room)
    if (readings === undefined) return
    room.meanwhile?.push(...readings)
    extend(room, readings)
  }

  function renewNext(room: Room): void {
    const tonight = room.tonight.value
    room.next.value = tonight && nextStep(tonight.pieces.values(), tonight.forecasts, present.now)
  }

  function extend(room: Room, readings: readonly ReadingTuple[]): void {
    const devices = room.tonight.value?.devices ?? new Map()
    const gapMs = (channelId: number) => gapMsOf(devices, channelId)
    room.traces.value = extendTraces(room.traces.value, readings, { gapMs, now: present.now })
  }

  async function loadTraces(room: Room): Promise<void> {
    if (room.meanwhile !== null) {
      room.outdated = true
      return
    }
    room.meanwhile = []
    room.outdated = false
    try {
      const to = new Date(present.now)
      const from = new Date(present.now - traceSpanMs)
      const query = { from: from.toISOString(), to: to.toISOString(), points: tracePoints }
      const { traces } = await call(readingEndpoints.traces, { params: { site: room.site }, query })
      room.traces.value = tracesFrom(traces)
      extend(room, room.meanwhile)
    } catch {
      later(() => {
        if (rooms.get(room.site) === room) void loadTraces(room)
      }, tracesAgainMs)
      room.outdated = false
    } finally {
      room.meanwhile = null
    }
    await loadOutdated(room)
  }

  /** Once more, when frames were missed while the lines were on their way. */
  async function loadOutdated(room: Room): Promise<void> {
    if (room.outdated) await loadTraces(room)
  }

  return { join, leave, stop }
})

/** The running night of a site, live while the component is there. See `LiveSite`. */
export function useLive(site: MaybeRefOrGetter<string>): LiveSite {
  const store = useLiveStore()
  const present = usePresent()
  const room = shallowRef<Room | null>(null)
  watch(
    () => toValue(site),
    (slug, before) => {
      if (before !== undefined && before !== '') store.leave(before)
      room.value = slug === '' ? null : store.join(slug)
    },
    { immediate: true },
  )
  onScopeDispose(() => {
    if (room.value !== null) store.leave(room.value.site)
  })

  const tonight = computed(() => room.value?.tonight.value ?? null)
  const freshnessOf: LiveSite['freshnessOf'] = (channelId) =>
    tonight.value === null
      ? { stale: true, why: 'never', ageMs: null }
      : freshness(tonight.value, channelId, present.now)

  return {
    connection: computed(() => room.value?.connection.value ?? 'connecting'),
    tonight,
    traces: computed(() => room.value?.traces.value ?? new Map()),
    next: computed(() => room.value?.next.value ?? null),
    now: toRef(present, 'now'),
    freshnessOf,
    staleOf: (channelId) => freshnessOf(channelId).stale,
    take: (changes) => {
      if (room.value === null || tonight.value === null) return
      room.value.tonight.value = applyChanges(tonight.value, changes)
    },
  }
}

function newRoom(site: string): Room {
  return {
    site,
    connection: shallowRef('connecting'),
    tonight: shallowRef(null),
    traces: shallowRef(new Map()),
    next: shallowRef(null),
    pages: 0,
    place: null,
    awaiting: false,
    meanwhile: null,
    outdated: false,
    cancelLeave: null,
  }
}

function later(task: () => void, ms: number): () => void {
  const timer = setTimeout(task, ms)
  return () => clearTimeout(timer)
}
