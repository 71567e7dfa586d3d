import type { Say, Words } from '@/components/chart/lane-data.ts'
import type { Format } from '@/composables/format.ts'

/** The chart's way of saying things, in a person's units and language. */
export function sayWith(format: Format, words: Words): Say {
  const clock = (at: number) => format.clock(at, { day: 'never' })
  return {
    words,
    clock,
    temperature: (c) => format.temperature(c),
    temperatureSpan: (lowC, highC) => format.temperatureSpan(lowC, highC),
    interval: (from, to) => words('format.interval', { from: clock(from), to: clock(to) }),
    duration: (ms) => format.duration(ms),
    levels: (format.units === 'us' ? [100, 150] : [40, 60]).map((shown) => format.celsius(shown)),
  }
}
