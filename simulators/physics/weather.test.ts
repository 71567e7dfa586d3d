import { describe, expect, it } from 'vitest'

import { saturationPressurePa } from './saturation-pressure.ts'
import { vapourPressurePa } from './humidity-ratio.ts'
import { createWeather } from './weather.ts'

const weather = createWeather({ seed: 'sky', elevationM: 220, longitudeDeg: -90 })
const HOUR_MS = 3_600_000

function mean(fromMs: number, hours: number, of: (atMs: number) => number): number {
  let sum = 0
  for (let hour = 0; hour < hours; hour++) sum += of(fromMs + hour * HOUR_MS)
  return sum / hours
}

describe('createWeather', () => {
  it('has warm summers and cold winters', () => {
    const air = (atMs: number) => weather(atMs).airC
    const july = mean(Date.UTC(2026, 6, 1), 31 * 24, air)
    const january = mean(Date.UTC(2026, 0, 1), 31 * 24, air)
    expect(july - january).toBeGreaterThan(18)
    expect(july).toBeLessThan(32)
    expect(january).toBeGreaterThan(-12)
  })

  it('is warmest in the afternoon of its own longitude and coolest before dawn', () => {
    // 90° west is six hours behind: three in the afternoon is 21 UTC, five in the morning 11 UTC.
    const at = (hourUtc: number) =>
      Array.from({ length: 60 }, (_, day) => weather(Date.UTC(2026, 3, 1 + day, hourUtc)).airC)
    const sum = (values: number[]) => values.reduce((total, value) => total + value, 0)
    expect(sum(at(21)) / 60 - sum(at(11)) / 60).toBeGreaterThan(6)
  })

  it('never holds more vapour than its air can', () => {
    for (let hour = 0; hour < 365 * 24; hour += 7) {
      const { airC, humidityRatio, pressurePa } = weather(Date.UTC(2026, 0, 1, hour))
      expect(vapourPressurePa(humidityRatio, pressurePa)).toBeLessThan(saturationPressurePa(airC))
    }
  })
})
