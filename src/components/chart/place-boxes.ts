import type { Box } from './lane-frame.ts'

/** A box that could be put somewhere, and how bad that would be. */
export interface Candidate extends Box {
  cost: number
  /** What it costs on top; asked for only where the box could become the best. */
  extra?: (box: Box) => number
}

/**
 * Puts one box where it costs least without touching those already placed or leaving the bounds; null where
 * no candidate fits. Calling it for the most important label first gives that one the best place.
 */
export function placeBox<T extends Candidate>(
  candidates: readonly T[],
  placed: readonly Box[],
  bounds: Box,
): { best: T; cost: number } | null {
  let found: { best: T; cost: number } | null = null
  for (const candidate of candidates) {
    const most = found?.cost ?? Infinity
    if (candidate.cost >= most || !within(candidate, bounds)) continue
    if (placed.some((box) => overlaps(candidate, box))) continue
    const cost = candidate.cost + (candidate.extra?.(candidate) ?? 0)
    if (cost < most) found = { best: candidate, cost }
  }
  return found
}

/** Whether two boxes share any area. */
export function overlaps(one: Box, other: Box): boolean {
  return (
    one.x < other.x + other.width &&
    other.x < one.x + one.width &&
    one.y < other.y + other.height &&
    other.y < one.y + one.height
  )
}

/** Whether a box lies wholly in the bounds. */
export function within(box: Box, bounds: Box): boolean {
  const slack = 0.5
  return (
    box.x >= bounds.x - slack &&
    box.y >= bounds.y - slack &&
    box.x + box.width <= bounds.x + bounds.width + slack &&
    box.y + box.height <= bounds.y + bounds.height + slack
  )
}
