import { celsiusFromPt100 } from './callendar-van-dusen.ts'
import { celsiusFromThermistor, type SteinhartHart } from './steinhart-hart.ts'
import { celsiusFromThermocoupleK } from './thermocouple-k.ts'

/** What hangs on a channel. A digital sensor sends °C itself; the others send what they measure. */
export const sensorKinds = ['digital', 'thermistor', 'pt100', 'thermocouple_k'] as const
export type SensorKind = (typeof sensorKinds)[number]

/** A sensor with what belongs to it alone. */
export type Sensor = {
  /** Added to what its curve gives, in K: from its last check against ice or boiling water. */
  offsetC: number
} & ({ kind: Exclude<SensorKind, 'thermistor'> } | { kind: 'thermistor'; curve: SteinhartHart })

/** A sensor and the half-open span, in milliseconds since 1970 UTC, during which it hung on its channel. */
export interface SensorSpan {
  fromMs: number
  toMs: number
  sensor: Sensor
}

/** A unit that sensors send, as SenML names it (RFC 8428, section 12.1). */
export type SensorUnit = 'Cel' | 'Ohm' | 'V'

/** The unit that a kind of sensor sends. */
export function unitOfSensor(kind: SensorKind): SensorUnit {
  if (kind === 'digital') return 'Cel'
  return kind === 'thermocouple_k' ? 'V' : 'Ohm'
}

/** What a sensor's value means, in °C; undefined where its curve gives no temperature. */
export function celsiusOf(sensor: Sensor, value: number): number | undefined {
  const celsius = bareCelsius(sensor, value)
  return celsius === undefined ? undefined : celsius + sensor.offsetC
}

/** The sensor that hung on a channel at a moment, among those it has had. */
export function sensorAt(spans: readonly SensorSpan[], atMs: number): Sensor | undefined {
  return spans.find((span) => span.fromMs <= atMs && atMs < span.toMs)?.sensor
}

function bareCelsius(sensor: Sensor, value: number): number | undefined {
  switch (sensor.kind) {
    case 'digital':
      return value
    case 'thermistor':
      return celsiusFromThermistor(value, sensor.curve)
    case 'pt100':
      return celsiusFromPt100(value)
    case 'thermocouple_k':
      return celsiusFromThermocoupleK(value)
  }
}
