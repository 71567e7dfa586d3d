import type { CookerKind } from '#shared/domain/cooking.ts'

import type { Weather } from './physics/weather.ts'
import { createPitSimulation, type PitSimulation } from './pit-simulation.ts'
import { INNER_STEP_S } from './piece-simulation.ts'

/** A pit's air at one moment. */
export interface PitMoment {
  airC: number
  /** At the tip of a probe in that air, its lag included. */
  probeC: number
  humidityRatio: number
}

/** A pit's whole course, computed as far as it was asked for. */
export interface PitCurve {
  readonly film: number
  at(atMs: number): PitMoment
  /** Opens the door at a moment. What was computed after it is computed again when asked for. */
  openDoor(atMs: number, seconds: number): void
  /** Changes the set from a moment on, °C. */
  setTo(atMs: number, setC: number): void
}

/**
 * The course of one pit, in days that run from solar noon to solar noon and are each begun afresh six hours before:
 * so that it is the same however often and from whichever moment it is rebuilt.
 */
export function createPitCurve(options: {
  seed: string
  kind: CookerKind
  setC: number
  longitudeDeg: number
  weather: (atMs: number) => Weather
}): PitCurve {
  const { seed, kind, setC, longitudeDeg, weather } = options
  const noonMs = (0.5 - longitudeDeg / 360) * DAY_MS
  const days = new Map<number, Day>()
  const openings: { atMs: number; seconds: number }[] = []
  const changes: { atMs: number; setC: number }[] = []
  const film = createPitSimulation({ seed, kind, setC, startMs: 0 }).film

  const setAt = (atMs: number) => changes.findLast((change) => change.atMs <= atMs)?.setC ?? setC

  const begin = (index: number): Day => {
    const fromMs = Math.ceil((index * DAY_MS + noonMs) / STEP_MS) * STEP_MS
    const startMs = fromMs - RUN_IN_MS
    const lasting = [...openings].sort((a, b) => a.atMs - b.atMs).filter(({ atMs }) => atMs >= startMs)
    const size = Math.ceil(DAY_MS / STEP_MS) + 1
    return {
      fromMs,
      pit: createPitSimulation({ seed, kind, setC: setAt(startMs), startMs }),
      openings: lasting,
      changes: changes.filter(({ atMs }) => atMs > startMs),
      filled: 0,
      airC: new Float64Array(size),
      probeC: new Float64Array(size),
      ratio: new Float64Array(size),
    }
  }

  /** Steps a day's pit until the value at `slot` is known, and not a step further. */
  const fill = (day: Day, slot: number) => {
    const { pit } = day
    while (day.filled <= slot) {
      if (day.filled > 0 || pit.atMs < day.fromMs) advance(day)
      if (pit.atMs < day.fromMs) continue
      day.airC[day.filled] = pit.airC
      day.probeC[day.filled] = pit.probeC
      day.ratio[day.filled] = pit.humidityRatio
      day.filled += 1
    }
  }

  const advance = (day: Day) => {
    const { pit } = day
    for (let next = day.openings[0]; next && next.atMs <= pit.atMs; next = day.openings[0]) {
      pit.openDoor(next.seconds - (pit.atMs - next.atMs) / 1000)
      day.openings.shift()
    }
    for (let next = day.changes[0]; next && next.atMs <= pit.atMs; next = day.changes[0]) {
      pit.setTo(next.setC)
      day.changes.shift()
    }
    // The sky changes slowly: once a minute is enough.
    if (day.sky === undefined || pit.atMs % 60_000 === 0) day.sky = weather(pit.atMs)
    pit.step(INNER_STEP_S, day.sky)
  }

  return {
    film,
    at(atMs) {
      const index = Math.floor((atMs - noonMs) / DAY_MS)
      let day = days.get(index)
      if (day === undefined) {
        day = begin(index)
        days.set(index, day)
      }
      const slot = Math.max(0, Math.floor((atMs - day.fromMs) / STEP_MS))
      fill(day, slot)
      return { airC: day.airC[slot] ?? 0, probeC: day.probeC[slot] ?? 0, humidityRatio: day.ratio[slot] ?? 0 }
    },
    openDoor(atMs, seconds) {
      const opening = { atMs: Math.floor(atMs / STEP_MS) * STEP_MS, seconds }
      openings.push(opening)
      // A day that has come no further than this moment can take it; one that is past it must be done again.
      for (const [index, day] of days) {
        if (day.pit.atMs > opening.atMs) days.delete(index)
        else insertByTime(day.openings, opening)
      }
    },
    setTo(atMs, next) {
      changes.push({ atMs, setC: next })
      changes.sort((a, b) => a.atMs - b.atMs)
      for (const [index, day] of days) if (day.fromMs + DAY_MS > atMs) days.delete(index)
    },
  }
}

interface Day {
  fromMs: number
  pit: PitSimulation
  openings: { atMs: number; seconds: number }[]
  changes: { atMs: number; setC: number }[]
  sky?: Weather
  /** How many of the ten-second values are known. */
  filled: number
  airC: Float64Array
  probeC: Float64Array
  ratio: Float64Array
}

function insertByTime(list: { atMs: number; seconds: number }[], item: { atMs: number; seconds: number }) {
  const place = list.findIndex(({ atMs }) => atMs > item.atMs)
  list.splice(place < 0 ? list.length : place, 0, item)
}

const STEP_MS = INNER_STEP_S * 1000
const DAY_MS = 86_400_000
const RUN_IN_MS = 6 * 3_600_000
