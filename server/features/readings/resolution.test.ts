import { describe, expect, test } from 'vitest'
import { resolutionFor } from './resolution.ts'

const minuteMs = 60_000
const hourMs = 60 * minuteMs
const dayMs = 24 * hourMs

describe('resolutionFor', () => {
  test.each([
    [14 * hourMs, 720, 'minutes'],
    [14 * hourMs, 1500, 'minutes'],
    [hourMs + 1, 60, 'minutes'],
    [hourMs + 1, 10, 'quarters'],
    [hourMs, 1500, 'readings'],
    [1000, 10, 'readings'],
    [5 * dayMs, 1500, 'minutes'],
    [7 * dayMs, 1000, 'quarters'],
    [730 * dayMs, 1500, 'quarters'],
    [36_500 * dayMs, 10, 'quarters'],
  ])('%d ms with at most %d points are drawn from %s', (spanMs, points, expected) => {
    const { source, stepMs } = resolutionFor(spanMs, points)
    expect(source).toBe(expected)
    // The worst place to begin is one millisecond before a step's end.
    expect(Math.floor((stepMs - 1 + spanMs - 1) / stepMs) + 1).toBeLessThanOrEqual(points)
    const unitMs = { readings: 1, minutes: minuteMs, quarters: 15 * minuteMs }[source]
    expect(stepMs % unitMs).toBe(0)
  })
})
