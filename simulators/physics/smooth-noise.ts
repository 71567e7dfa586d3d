import { seededRandom } from '#shared/domain/random.ts'

/** A smooth course of chance over time: mean 0, standard deviation 1, the same for a seed and a moment. */
export type SmoothNoise = (atMs: number) => number

/**
 * Noise that needs no history: standard normal values at whole multiples of the period, each drawn from a seed of
 * its own, joined by a smooth blend whose variance is 1 everywhere. Rebuilding it from any moment gives the
 * same course.
 */
export function smoothNoise(seed: string, periodMs: number): SmoothNoise {
  const knot = (index: number) => seededRandom(seed, index).normal()
  let here = Number.NaN
  let from = 0
  let to = 0
  return (atMs) => {
    const position = atMs / periodMs
    const index = Math.floor(position)
    if (index !== here) {
      from = index === here + 1 ? to : knot(index)
      to = knot(index + 1)
      here = index
    }
    const share = position - index
    const later = share * share * (3 - 2 * share)
    const earlier = 1 - later
    return (from * earlier + to * later) / Math.hypot(earlier, later)
  }
}
