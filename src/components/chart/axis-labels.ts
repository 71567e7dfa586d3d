import type { TimeTick } from './time-axis.ts'
import { textWidth } from './text-width.ts'

/** A text over the lanes. `x` is its middle, px. */
export interface AxisLabel {
  x: number
  text: string
  kind: 'tick' | 'midnight' | 'service'
}

/**
 * The labels of the clock's row: service hours first, then the turn of the day, then the other ticks; one that would
 * touch another or be cut off at an end is left out (its line stays).
 */
export function axisLabels(options: {
  ticks: readonly TimeTick[]
  services: readonly { x: number; text: string }[]
  width: number
  size: number
  textOf: (tick: TimeTick) => string
}): AxisLabel[] {
  const { ticks, services, width, size, textOf } = options
  const wanted: AxisLabel[] = [
    ...services.map(({ x, text }): AxisLabel => ({ x, text, kind: 'service' })),
    ...ticks
      .toSorted((a, b) => Number(b.midnight) - Number(a.midnight))
      .map((tick): AxisLabel => ({
        x: tick.x,
        text: textOf(tick),
        kind: tick.midnight ? 'midnight' : 'tick',
      })),
  ]
  const placed: (AxisLabel & { half: number })[] = []
  for (const label of wanted) {
    const half = textWidth(label.text, size) / 2 + size * 0.35
    // A service hour at the edge is moved in rather than left out: it is what the night is for.
    const x = label.kind === 'service' ? Math.min(width - half, Math.max(half, label.x)) : label.x
    const cut = x - half < -1 || x + half > width + 1
    if (!cut && placed.every((other) => Math.abs(other.x - x) >= other.half + half)) {
      placed.push({ ...label, x, half })
    }
  }
  return placed.map(({ x, text, kind }) => ({ x, text, kind })).sort((a, b) => a.x - b.x)
}
