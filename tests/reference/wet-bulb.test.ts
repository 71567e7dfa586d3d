import psychrolib from 'psychrolib'
import { describe, expect, it } from 'vitest'

import { humidityRatio, vapourPressurePa } from '../../simulators/physics/humidity-ratio.ts'
import { saturationPressurePa, saturationSlopePerK } from '../../simulators/physics/saturation-pressure.ts'
import { standardPressurePa } from '../../simulators/physics/standard-pressure.ts'
import { wetBulbC } from '../../simulators/physics/wet-bulb.ts'

psychrolib.SetUnitSystem(psychrolib.SI)

const fahrenheit = (celsius: number) => celsius * 1.8 + 32

describe('moist air against ASHRAE Fundamentals 2017, chapter 1', () => {
  // Values as published with psychrolib's tests, ±300 ppm.
  it.each([
    [5, 872.6],
    [25, 3169.7],
    [50, 12351.3],
    [100, 101418.0],
  ])('saturates at %d °C at %d Pa', (temperatureC, pascal) => {
    expect(Math.abs(saturationPressurePa(temperatureC) / pascal - 1)).toBeLessThan(3e-4)
  })

  it.each([
    [0, 101325],
    [500, 95461],
    [1000, 89875],
    [4000, 61640],
  ])('has at %d m the standard pressure %d Pa', (elevationM, pascal) => {
    expect(Math.abs(standardPressurePa(elevationM) - pascal)).toBeLessThan(1)
  })

  it('finds the published wet bulb of 7 °C, 61 %, 100000 Pa', () => {
    const ratio = humidityRatio(0.61 * saturationPressurePa(7), 100000)
    expect(Math.abs(wetBulbC(7, ratio, 100000) - 3.92667)).toBeLessThan(0.001)
  })

  it('solves example 1: 40 °C dry, 20 °C wet has 0.0065 kg/kg and 14 %', () => {
    // The ratio is printed to four decimals, which leaves a tenth of a kelvin open.
    expect(Math.abs(wetBulbC(40, 0.0065, 101325) - 20)).toBeLessThan(0.1)
    const relative = vapourPressurePa(0.0065, 101325) / saturationPressurePa(40)
    expect(relative).toBeCloseTo(0.14, 2)
  })

  // Computed: a 250 °F pit against humidity ratio.
  it.each([
    [0.01, 101.5],
    [0.03, 112.4],
    [0.06, 124.3],
    [0.1, 135.5],
    [0.15, 145.4],
    [0.2, 152.8],
    [0.3, 163.2],
  ])('puts the wet bulb of a 250 °F pit with %d kg/kg at %d °F', (ratio, expected) => {
    expect(Math.abs(fahrenheit(wetBulbC(121.111, ratio, 101325)) - expected)).toBeLessThan(0.1)
  })
})

describe('moist air against psychrolib', () => {
  it('agrees on saturation from −40 to 150 °C', () => {
    for (let temperatureC = -40; temperatureC <= 150; temperatureC += 2.5) {
      const reference = psychrolib.GetSatVapPres(temperatureC)
      expect(Math.abs(saturationPressurePa(temperatureC) / reference - 1)).toBeLessThan(1e-6)
    }
  })

  it('has the slope of its own saturation curve', () => {
    for (const temperatureC of [5, 40, 72, 99, 130]) {
      const rise = Math.log(
        saturationPressurePa(temperatureC + 0.01) / saturationPressurePa(temperatureC - 0.01),
      )
      expect(saturationSlopePerK(temperatureC)).toBeCloseTo(rise / 0.02, 6)
    }
  })

  it('agrees on the wet bulb of rooms and pits', () => {
    for (const pressurePa of [101325, 89875]) {
      for (const airC of [15, 25, 40]) {
        for (const relative of [0.1, 0.5, 0.9]) {
          const ratio = humidityRatio(relative * saturationPressurePa(airC), pressurePa)
          const reference = psychrolib.GetTWetBulbFromRelHum(airC, relative, pressurePa)
          expect(Math.abs(wetBulbC(airC, ratio, pressurePa) - reference)).toBeLessThan(0.002)
        }
      }
      for (const airC of [95, 107, 121, 135]) {
        for (const ratio of [0.01, 0.05, 0.12, 0.25]) {
          // There the reference's bisection steps over the boiling point and loses its bracket.
          if (airC === 135 && ratio === 0.25) continue
          const reference = psychrolib.GetTWetBulbFromHumRatio(airC, ratio, pressurePa)
          expect(Math.abs(wetBulbC(airC, ratio, pressurePa) - reference)).toBeLessThan(0.002)
        }
      }
    }
  })

  it('refuses air that cannot hold so much vapour', () => {
    expect(() => wetBulbC(10, 0.05, 101325)).toThrow(RangeError)
    expect(() => wetBulbC(10, Number.NaN, 101325)).toThrow(RangeError)
  })
})
