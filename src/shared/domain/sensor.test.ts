import { describe, expect, test } from 'vitest'
import { celsiusOf, sensorAt, unitOfSensor, type SensorSpan } from './sensor.ts'

describe('celsiusOf', () => {
  test('adds the offset after the curve', () => {
    expect(celsiusOf({ kind: 'digital', offsetC: -0.4 }, 100)).toBeCloseTo(99.6, 10)
    expect(celsiusOf({ kind: 'pt100', offsetC: 1 }, 138.505)).toBeCloseTo(101, 2)
    expect(celsiusOf({ kind: 'thermocouple_k', offsetC: 0 }, 0.004096)).toBeCloseTo(100, 1)
  })
  test('gives nothing where the curve gives nothing', () => {
    const curve = { a: 1.1e-3, b: 2.4e-4, c: 7e-8 }
    expect(celsiusOf({ kind: 'thermistor', offsetC: 5, curve }, 0)).toBeUndefined()
  })
})

test('each kind sends its own unit', () => {
  expect(unitOfSensor('digital')).toBe('Cel')
  expect(unitOfSensor('thermistor')).toBe('Ohm')
  expect(unitOfSensor('pt100')).toBe('Ohm')
  expect(unitOfSensor('thermocouple_k')).toBe('V')
})

test('sensorAt takes the beginning of a span in and its end out', () => {
  const spans: SensorSpan[] = [
    { fromMs: -Infinity, toMs: 1000, sensor: { kind: 'digital', offsetC: 0 } },
    { fromMs: 1000, toMs: 2000, sensor: { kind: 'pt100', offsetC: 0 } },
  ]
  expect(sensorAt(spans, 999)?.kind).toBe('digital')
  expect(sensorAt(spans, 1000)?.kind).toBe('pt100')
  expect(sensorAt(spans, 2000)).toBeUndefined()
})
