import { describe, expect, it } from 'vitest'
import {
  celsiusFrom,
  celsiusFromFahrenheit,
  fahrenheitFromCelsius,
  kilogramsFrom,
  kilogramsFromPounds,
  massIn,
  poundsFromKilograms,
  temperatureDifferenceIn,
  temperatureIn,
} from './units.ts'

describe('temperatures', () => {
  it('meet at the fixed points of both scales (ice, boiling water, and where they cross)', () => {
    expect(fahrenheitFromCelsius(0)).toBe(32)
    expect(fahrenheitFromCelsius(100)).toBeCloseTo(212, 12)
    expect(fahrenheitFromCelsius(-40)).toBe(-40)
    expect(celsiusFromFahrenheit(203)).toBeCloseTo(95, 12)
  })

  it('come back as they went, over the whole range', () => {
    for (let celsius = -60; celsius <= 600; celsius += 7) {
      expect(celsiusFrom('us', temperatureIn('us', celsius))).toBeCloseTo(celsius, 9)
      expect(celsiusFrom('si', temperatureIn('si', celsius))).toBe(celsius)
    }
  })

  it('have differences without an offset', () => {
    expect(temperatureDifferenceIn('us', 10)).toBe(18)
    expect(temperatureDifferenceIn('us', 0)).toBe(0)
    expect(temperatureDifferenceIn('si', 10)).toBe(10)
  })
})

describe('masses', () => {
  it('use the international pound of 0.45359237 kg (NIST SP 811, Appendix B.8)', () => {
    expect(kilogramsFromPounds(1)).toBe(0.45359237)
    expect(poundsFromKilograms(4.5359237)).toBeCloseTo(10, 12)
  })

  it('come back as they went', () => {
    expect(kilogramsFrom('us', massIn('us', 6.8))).toBeCloseTo(6.8, 12)
    expect(massIn('si', 6.8)).toBe(6.8)
  })
})
