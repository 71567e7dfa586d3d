import { describe, expect, test } from 'vitest'
import { celsiusFromPt100 } from '#shared/domain/callendar-van-dusen.ts'
import { celsiusFromThermistor } from '#shared/domain/steinhart-hart.ts'
import { celsiusFromThermocoupleK } from '#shared/domain/thermocouple-k.ts'

describe('Steinhart–Hart', () => {
  // A laser maker's manual, appendix A: resistance of its thermistor. The curve is fitted through 0, 25 and 50 °C,
  // computed; at the points between, the manual's own values are met within 0.003 K.
  const curve = { a: 1.10415912e-3, b: 2.38917947e-4, c: 6.93162653e-8 }
  test.each([
    [32128, 0],
    [9814, 25],
    [3542, 50],
  ])('%d Ω, fitted to %d °C', (ohm, celsius) => {
    expect(celsiusFromThermistor(ohm, curve)).toBeCloseTo(celsius, 4)
  })
  test.each([
    [19549, 10, 10.0001],
    [12262, 20, 19.9994],
    [7908, 30, 29.9978],
  ])('%d Ω, printed as %d °C', (ohm, printed, computed) => {
    const celsius = celsiusFromThermistor(ohm, curve)
    expect(celsius).toBeCloseTo(computed, 3)
    expect(Math.abs((celsius ?? NaN) - printed)).toBeLessThan(0.003)
  })
  test('no temperature for a broken wire', () => {
    expect(celsiusFromThermistor(0, curve)).toBeUndefined()
    expect(celsiusFromThermistor(-5, curve)).toBeUndefined()
  })
})

describe('Pt100, IEC 60751', () => {
  test.each([
    [119.397, 50],
    [136.608, 95],
    [138.505, 100],
    [157.325, 150],
    [175.856, 200],
    [100, 0],
    // From memory: the standard's table at −50 and −100 °C.
    [80.306, -50],
    [60.256, -100],
  ])('%d Ω is %d °C', (ohm, celsius) => {
    // Half of the table's last digit, 0.0005 Ω, is 0.0013 K.
    expect(Math.abs((celsiusFromPt100(ohm) ?? NaN) - celsius)).toBeLessThan(0.002)
  })
  test('nothing outside the standard’s span', () => {
    expect(celsiusFromPt100(1e6)).toBeUndefined()
    expect(celsiusFromPt100(-20)).toBeUndefined()
  })
})

describe('type K, ITS-90', () => {
  // NIST's table of the forward function, from memory and computed; the inverse differs from it by at most 0.06 K,
  // and half of the last digit printed, 0.0005 mV, is 0.0125 K.
  test.each([
    [0, 0],
    [1.0, 25],
    [2.023, 50],
    [3.889, 95],
    [4.096, 100],
    [5.532, 135],
    [6.138, 150],
    [8.138, 200],
    [12.209, 300],
    // From memory: both sides of the joint at 500 °C, and below 0 °C.
    [20.644, 500],
    [24.905, 600],
    [-1.889, -50],
  ])('%d mV is %d °C', (mv, celsius) => {
    expect(Math.abs((celsiusFromThermocoupleK(mv / 1000) ?? NaN) - celsius)).toBeLessThan(0.07)
  })
  test('nothing outside the polynomials’ span', () => {
    expect(celsiusFromThermocoupleK(0.06)).toBeUndefined()
    expect(celsiusFromThermocoupleK(-0.006)).toBeUndefined()
  })
})
