import { maxPackRecords } from '#shared/contract/senml.ts'
import { celsiusOf, sensorAt, unitOfSensor } from '#shared/domain/sensor.ts'
import { highestC, lowestC, maxAgeMs, maxAheadMs } from './bounds.ts'
import type { NewReading } from './decode.ts'
import type { KnownChannel, KnownChannels } from './known-device.ts'

/** Times below this are relative to now (RFC 8428, section 4.5.3), in seconds. */
const relativeBelow = 2 ** 28
/** As the contract has it. */
const maxUnitLength = 20

/**
 * The quick way for the packs that devices send all day: of each record a channel's number, a unit, a value and a
 * time, base time and base unit, and nothing wrong with any of them. Whatever else stands in a pack, this gives
 * undefined, and the thorough way decides; what it does take, that would have taken just the same.
 *
 * @param json what JSON.parse made
 * @param nowMs time of receipt, in milliseconds since 1970 UTC
 */
export function decodePlain(json: unknown, channels: KnownChannels, nowMs: number): NewReading[] | undefined {
  if (!Array.isArray(json) || json.length === 0 || json.length > maxPackRecords) return undefined
  const records: readonly unknown[] = json
  const readings: NewReading[] = []
  let baseTime: number | undefined
  let baseUnit: string | undefined
  for (let index = 0; index < records.length; index++) {
    const record = records[index]
    if (!isFields(record)) return undefined
    let channel: KnownChannel | undefined
    let value: number | undefined
    let time: number | undefined
    let unit: string | undefined
    for (const label in record) {
      const field = record[label]
      if (label === 'n') channel = channelNamed(field, channels)
      // As a base value of 0 is added: −0 becomes 0.
      else if (label === 'v' && typeof field === 'number') value = field + 0
      else if (label === 't' && typeof field === 'number') time = field
      else if (label === 'u' && typeof field === 'string') unit = field
      else if (label === 'bt' && typeof field === 'number') baseTime = field
      else if (label === 'bu' && typeof field === 'string' && field.length <= maxUnitLength) baseUnit = field
      else if (label !== 'bn' || field !== '') return undefined
    }
    if (channel === undefined || value === undefined || !Number.isFinite(value)) return undefined
    const atMs =
      time === undefined && baseTime === undefined ? nowMs : absoluteMs((baseTime ?? 0) + (time ?? 0))
    const celsius = celsiusAt(channel, atMs, value, unit ?? baseUnit, nowMs)
    if (celsius === undefined) return undefined
    readings.push({ channelId: channel.id, atMs, value, celsius, receivedAtMs: nowMs })
  }
  return readings
}

function isFields(record: unknown): record is Readonly<Record<string, unknown>> {
  return typeof record === 'object' && record !== null
}

/** Written as the thorough way wants it: no sign, no zero in front. */
function channelNamed(name: unknown, channels: KnownChannels): KnownChannel | undefined {
  if (typeof name !== 'string') return undefined
  const number = Number(name)
  return Number.isInteger(number) && number > 0 && String(number) === name ? channels.get(number) : undefined
}

/** NaN for a relative time: rare, and left to the thorough way. */
function absoluteMs(seconds: number): number {
  return seconds >= relativeBelow ? Math.round(seconds * 1000) : NaN
}

/** What the channel's sensor of that time means by a value; undefined when anything is wrong with it. */
function celsiusAt(
  channel: KnownChannel,
  atMs: number,
  value: number,
  unit: string | undefined,
  nowMs: number,
): number | undefined {
  if (!(atMs <= nowMs + maxAheadMs && atMs >= nowMs - maxAgeMs)) return undefined
  const sensor = sensorAt(channel.sensors, atMs)
  if (sensor === undefined || unitOfSensor(sensor.kind) !== unit) return undefined
  const celsius = celsiusOf(sensor, value)
  return celsius !== undefined && celsius >= lowestC && celsius <= highestC ? celsius : undefined
}
