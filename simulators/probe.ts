import { seededRandom } from '#shared/domain/random.ts'

/** What a probe shows at a moment; undefined while it is silent. */
export interface Probe {
  /** `trueC` at its tip, lag included; `pitC` of the air round the piece, for a tip that has slipped out. */
  reading(atMs: number, trueC: number, pitC: number): number | undefined
}

/** A tip partly out of the meat, from when to when, and how far it follows the pit: 0 not at all, 1 wholly. */
export interface Slip {
  fromMs: number
  toMs: number
  share: number
}

/**
 * A probe on one channel: an offset left by its calibration, noise, the grain of its numbers, rare spikes, silences.
 * Each reading draws from a seed made of channel and moment, so that it comes out the same whenever it is asked.
 * The lag belongs to the curves, which have a past.
 */
export function createProbe(options: { seed: string; role: 'pit' | 'meat'; slip?: Slip | undefined }): Probe {
  const { seed, role, slip } = options
  const offsetC = 0.25 * clampNormal(seededRandom(seed, 'offset').normal())
  const noiseC = role === 'pit' ? 0.35 : 0.06
  const silence = createSilences(seed)
  return {
    reading(atMs, trueC, pitC) {
      if (silence(atMs)) return undefined
      const random = seededRandom(seed, atMs)
      const slipped = slip && atMs >= slip.fromMs && atMs < slip.toMs ? slip.share : 0
      let shownC = trueC + slipped * (pitC - trueC) + offsetC + noiseC * random.normal()
      if (random.uniform() < SPIKE_CHANCE)
        shownC += (random.uniform() < 0.7 ? 1 : -1) * (15 + 60 * random.uniform())
      // A digital sensor's sixteenths of a degree.
      return Math.round(shownC * 16) / 16
    },
  }
}

/** Draws whether, when and how far the tip in a piece slips: about one piece in fourteen. */
export function drawSlip(seed: string, onMs: number): Slip | undefined {
  const random = seededRandom(seed, 'slip')
  if (random.uniform() >= 0.07) return undefined
  const fromMs = onMs + Math.round((90 + 420 * random.uniform()) * 60) * 1000
  return {
    fromMs,
    toMs: fromMs + Math.round((12 + 38 * random.uniform()) * 60) * 1000,
    share: 0.12 + 0.4 * random.uniform(),
  }
}

/** Every two hours draw by themselves whether the channel falls silent in them, for 2 to 20 minutes. */
function createSilences(seed: string): (atMs: number) => boolean {
  let span = Number.NaN
  let fromMs = 0
  let toMs = 0
  return (atMs) => {
    const present = Math.floor(atMs / SPAN_MS)
    if (present !== span) {
      span = present
      const random = seededRandom(seed, 'silence', present)
      const silent = random.uniform() < 0.025
      fromMs = present * SPAN_MS + 0.8 * SPAN_MS * random.uniform()
      toMs = silent ? fromMs + (2 + 18 * random.uniform()) * 60_000 : fromMs
    }
    return atMs >= fromMs && atMs < toMs
  }
}

function clampNormal(value: number): number {
  return Math.max(-2.5, Math.min(2.5, value))
}

const SPAN_MS = 7_200_000
const SPIKE_CHANCE = 1 / 4000
