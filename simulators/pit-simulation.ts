import type { CookerKind } from '#shared/domain/cooking.ts'
import { seededRandom } from '#shared/domain/random.ts'

import { createFuelDips } from './physics/fuel-dip.ts'
import { pitKinds } from './physics/pit-kinds.ts'
import { smoothNoise } from './physics/smooth-noise.ts'
import type { Weather } from './physics/weather.ts'
import { INNER_STEP_S } from './piece-simulation.ts'

/** One pit with its fire. Its moments are absolute, so that its chance does not depend on when it was begun. */
export interface PitSimulation {
  /** Carries the pit on; the rest of a step that fills no inner step of 10 s is kept for the next. */
  step(stepS: number, weather: Weather): void
  /** Opens the door now, for so many seconds. */
  openDoor(seconds: number): void
  /** Changes what the pit is set to, °C. */
  setTo(setC: number): void
  readonly atMs: number
  /** Air round the meat, °C. */
  readonly airC: number
  /** What a thin probe in that air would show without its own faults: it lags by a minute. */
  readonly probeC: number
  readonly humidityRatio: number
  /** Convection on meat in it, W/m²K. */
  readonly film: number
}

/**
 * Simulates a pit: what it is set to, followed with a lag; its own wander and rhythm; fuel running low; doors;
 * wind and cold. It forgets: begun six hours earlier or later, it is at the same temperature.
 */
export function createPitSimulation(options: {
  seed: string
  kind: CookerKind
  setC: number
  /** A multiple of 10 s. */
  startMs: number
}): PitSimulation {
  const { seed, startMs } = options
  const kind = pitKinds[options.kind]
  const wander = smoothNoise(`${seed}/wander`, kind.wanderMinutes * MINUTE_MS)
  const drift = smoothNoise(`${seed}/drift`, 4.3 * kind.wanderMinutes * MINUTE_MS)
  const beat = smoothNoise(`${seed}/beat`, 6 * kind.cycleMinutes * MINUTE_MS)
  const dampness = smoothNoise(`${seed}/damp`, 5 * HOUR_MS)
  const dip = createFuelDips(seed, kind)
  const look = createLooks(seed, kind.looksPerHour)
  const follow = share(kind.followMinutes)
  const recover = share(kind.recoveryMinutes / 3)
  let setC = options.setC
  let followedC = options.setC
  let doorLossC = 0
  let doorUntilMs = 0
  let atMs = startMs
  let owedS = 0
  let airC = options.setC
  let probeC = options.setC
  let ratio = kind.moisture

  const innerStep = (weather: Weather) => {
    atMs += INNER_STEP_S * 1000
    followedC += (setC - followedC) * follow
    const cycle = Math.sin(2 * Math.PI * (atMs / (kind.cycleMinutes * MINUTE_MS) + 0.4 * beat(atMs)))
    const fireC =
      followedC +
      kind.wanderC * (0.8 * wander(atMs) + 0.6 * drift(atMs)) +
      kind.cycleC * cycle -
      dip(atMs) +
      kind.coldShare * (weather.airC - 15) +
      kind.windShare * (weather.windMps - 3)
    const open = atMs <= doorUntilMs || look(atMs)
    const most = kind.doorShare * Math.max(0, fireC - weather.airC)
    doorLossC += open ? (most - doorLossC) * DOOR_SHARE : -doorLossC * recover
    airC = Math.max(weather.airC, fireC - doorLossC)
    probeC += (airC - probeC) * PROBE_SHARE
    const closed = most > 0 ? 1 - 0.8 * (doorLossC / most) : 1
    ratio = weather.humidityRatio + kind.moisture * Math.exp(0.25 * dampness(atMs)) * closed
  }

  return {
    step(stepS, weather) {
      owedS += stepS
      while (owedS >= INNER_STEP_S - 1e-9) {
        innerStep(weather)
        owedS -= INNER_STEP_S
      }
    },
    openDoor: (seconds) => {
      doorUntilMs = Math.max(doorUntilMs, atMs + seconds * 1000)
    },
    setTo: (next) => {
      setC = next
    },
    get atMs() {
      return atMs
    },
    get airC() {
      return airC
    },
    get probeC() {
      return probeC
    },
    get humidityRatio() {
      return ratio
    },
    film: kind.film,
  }
}

/** Whether somebody is looking in: each hour draws by itself, and a look lasts 15 to 60 s. */
function createLooks(seed: string, perHour: number): (atMs: number) => boolean {
  let hour = Number.NaN
  let fromMs = 0
  let toMs = 0
  return (atMs) => {
    const present = Math.floor(atMs / HOUR_MS)
    if (present !== hour) {
      hour = present
      const random = seededRandom(seed, 'look', present)
      const looks = random.uniform() < perHour
      fromMs = (present + 0.95 * random.uniform()) * HOUR_MS
      toMs = looks ? fromMs + (15 + 45 * random.uniform()) * 1000 : fromMs
    }
    return atMs >= fromMs && atMs < toMs
  }
}

/** Share of a gap closed in one inner step by a first-order lag with this time constant. */
function share(minutes: number): number {
  return 1 - Math.exp(-INNER_STEP_S / 60 / minutes)
}

const MINUTE_MS = 60_000
const HOUR_MS = 3_600_000
/** An open door empties a pit within a minute or two. */
const DOOR_SHARE = share(0.9)
const PROBE_SHARE = share(1)
