import { seededRandom } from '#shared/domain/random.ts'

import type { PitKind } from './pit-kinds.ts'

/**
 * How far a fire has sunk because its fuel ran low, K, at a moment: it sinks steadily, is fed, and comes back.
 *
 * Each hour draws by itself whether a dip begins in it; like all chance of a pit it needs no history.
 */
export function createFuelDips(seed: string, kind: PitKind): (atMs: number) => number {
  let hour = Number.NaN
  let dips: Dip[] = []
  return (atMs) => {
    const present = Math.floor(atMs / HOUR_MS)
    if (present !== hour) {
      hour = present
      dips = [present - 4, present - 3, present - 2, present - 1, present].flatMap((each) =>
        drawDip(seed, kind, each),
      )
    }
    let sunk = 0
    for (const dip of dips) sunk = Math.max(sunk, dipAt(dip, kind, (atMs - dip.fromMs) / 60_000))
    return sunk
  }
}

/** When the fire was fed after each dip that began in a span: the moments a hand tended it. */
export function fuelFedAt(seed: string, kind: PitKind, fromMs: number, toMs: number): number[] {
  const moments: number[] = []
  for (let hour = Math.floor(fromMs / HOUR_MS) - 2; hour * HOUR_MS < toMs; hour++) {
    for (const dip of drawDip(seed, kind, hour)) {
      const fedMs = dip.fromMs + dip.minutes * 60_000
      if (fedMs >= fromMs && fedMs < toMs) moments.push(Math.floor(fedMs / 60_000) * 60_000)
    }
  }
  return moments
}

interface Dip {
  fromMs: number
  minutes: number
  depthC: number
}

function drawDip(seed: string, kind: PitKind, hour: number): Dip[] {
  const random = seededRandom(seed, 'dip', hour)
  if (random.uniform() >= kind.dipsPerHour) return []
  const between = ([least, most]: [number, number]) => least + (most - least) * random.uniform()
  return [
    {
      fromMs: (hour + random.uniform()) * HOUR_MS,
      minutes: between(kind.dipMinutes),
      depthC: between(kind.dipC),
    },
  ]
}

function dipAt(dip: Dip, kind: PitKind, minutes: number): number {
  if (minutes <= 0) return 0
  if (minutes <= dip.minutes) return (dip.depthC * minutes) / dip.minutes
  return dip.depthC * Math.exp(-(minutes - dip.minutes) / kind.recoveryMinutes)
}

const HOUR_MS = 3_600_000
