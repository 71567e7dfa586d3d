import { maxPackRecords, SenmlPack, SenmlRecord, senmlUnits } from '#shared/contract/senml.ts'
import type { RejectionReason } from '#shared/contract/device.ts'
import { celsiusOf, sensorAt, unitOfSensor } from '#shared/domain/sensor.ts'
import { resolvePack, type ResolvedRecord } from '#shared/domain/senml.ts'
import { highestC, lowestC, maxAgeMs, maxAheadMs } from './bounds.ts'
import { decodePlain } from './decode-plain.ts'
import type { KnownChannels } from './known-device.ts'

/** A reading that may be stored. */
export interface NewReading {
  channelId: number
  /** Milliseconds since 1970 UTC. */
  atMs: number
  /** As sent. */
  value: number
  /** What it means, by the sensor of its time. */
  celsius: number
  /** Milliseconds since 1970 UTC. */
  receivedAtMs: number
}

/** Why something was not taken; `record` is what was sent, as text. */
export interface Refused {
  reason: RejectionReason
  detail: string
  record: string
}

export interface Decoded {
  readings: NewReading[]
  refused: Refused[]
  batteryPercent: number | undefined
  signalDbm: number | undefined
  /** A channel number was not known: the device may have got channels since it was looked up. */
  unknownChannel: boolean
}

const knownUnits: readonly string[] = senmlUnits

/**
 * Reads a pack and checks each of its records: those in order come back as readings, each other one with its reason.
 *
 * @param payload JSON as it came, or a pack that was parsed already
 * @param nowMs time of receipt, also of the records without a time; milliseconds since 1970 UTC
 */
export function decodePack(
  payload: Buffer | readonly SenmlRecord[],
  channels: KnownChannels,
  nowMs: number,
): Decoded {
  if (!Buffer.isBuffer(payload)) return decodeRecords(payload, channels, nowMs)
  let json: unknown
  try {
    json = JSON.parse(payload.toString())
  } catch (error) {
    const detail = error instanceof Error ? error.message : 'not JSON'
    const record = payload.toString('utf8', 0, maxRecordText)
    return { ...nothingDecoded(), refused: [{ reason: 'not-json', detail, record }] }
  }
  return decodeRecords(json, channels, nowMs)
}

function decodeRecords(json: unknown, channels: KnownChannels, nowMs: number): Decoded {
  const readings = decodePlain(json, channels, nowMs)
  if (readings === undefined) return decodeThoroughly(json, channels, nowMs)
  const decoded = nothingDecoded()
  decoded.readings = readings
  return decoded
}

/** Takes every kind of record, and tells of each that it refuses the reason. */
export function decodeThoroughly(json: unknown, channels: KnownChannels, nowMs: number): Decoded {
  const decoded = nothingDecoded()
  const records = checkRecords(json, decoded.refused)
  const resolved = resolvePack(records, nowMs / 1000)
  for (const { index, reason, detail } of resolved.refused) {
    decoded.refused.push({ reason, detail, record: JSON.stringify(records[index]) })
  }
  for (const record of resolved.records) {
    if (record.name === 'battery') {
      decoded.batteryPercent = takeState(record, '%EL', 0, 100, decoded.refused) ?? decoded.batteryPercent
    } else if (record.name === 'signal') {
      decoded.signalDbm = takeState(record, 'dBm', -200, 50, decoded.refused) ?? decoded.signalDbm
    } else {
      takeReading(record, channels, nowMs, decoded)
    }
  }
  return decoded
}

function nothingDecoded(): Decoded {
  return {
    readings: [],
    refused: [],
    batteryPercent: undefined,
    signalDbm: undefined,
    unknownChannel: false,
  }
}

/** The records of a pack; what cannot be read is refused, and nothing else of the pack with it if possible. */
function checkRecords(json: unknown, refused: Refused[]): readonly SenmlRecord[] {
  const pack = SenmlPack.safeParse(json)
  if (pack.success) return pack.data
  return parseEach(json, refused)
}

/** The slow way, for a pack with something wrong in it: record by record. */
function parseEach(json: unknown, refused: Refused[]): readonly SenmlRecord[] {
  if (!Array.isArray(json) || json.length === 0 || json.length > maxPackRecords) {
    const detail = Array.isArray(json)
      ? `a pack has 1 to ${maxPackRecords} records, this one ${json.length}`
      : 'a pack is a list of records'
    refused.push({ reason: 'not-senml', detail, record: JSON.stringify(json) })
    return []
  }
  const records: SenmlRecord[] = []
  for (const item of json) {
    const parsed = SenmlRecord.safeParse(item)
    if (parsed.success) {
      records.push(parsed.data)
      continue
    }
    const issue = parsed.error.issues[0]
    const field = issue?.path.join('.') ?? ''
    const refusal: Refused = {
      reason: field === 'v' ? 'not-a-number' : 'not-senml',
      detail:
        field === '' ? 'a record is an object' : `field “${field}”: ${issue?.message ?? 'not readable'}`,
      record: JSON.stringify(item),
    }
    refused.push(refusal)
    // Without its base fields the records after it would mean something else.
    if (holdsBase(item)) return []
  }
  return records
}

function holdsBase(item: unknown): boolean {
  return typeof item === 'object' && item !== null && Object.keys(item).some((label) => label.startsWith('b'))
}

function takeReading(record: ResolvedRecord, channels: KnownChannels, nowMs: number, decoded: Decoded): void {
  const channel = /^[1-9]\d{0,5}$/.test(record.name) ? channels.get(Number(record.name)) : undefined
  if (!channel) {
    decoded.unknownChannel = true
    refuse(decoded, record, 'unknown-channel', `this device has no channel “${record.name}”`)
    return
  }
  const atMs = record.timeMs ?? nowMs
  if (atMs > nowMs + maxAheadMs) {
    refuse(decoded, record, 'time-in-future', `${timeText(atMs)} is more than two minutes ahead`)
    return
  }
  // Written so that a time that is no number is refused too.
  if (!(atMs >= nowMs - maxAgeMs)) {
    refuse(decoded, record, 'time-too-old', `${timeText(atMs)} is more than 14 days ago`)
    return
  }
  const sensor = sensorAt(channel.sensors, atMs)
  if (!sensor) {
    refuse(decoded, record, 'unknown-channel', `channel ${record.name} had no sensor at ${timeText(atMs)}`)
    return
  }
  const unit = unitOfSensor(sensor.kind)
  if (record.unit !== unit) {
    if (record.unit === undefined || !knownUnits.includes(record.unit)) {
      refuse(decoded, record, 'unknown-unit', record.unit === undefined ? 'no unit' : `unit “${record.unit}”`)
    } else {
      refuse(decoded, record, 'wrong-unit', `channel ${record.name} sends ${unit}, not ${record.unit}`)
    }
    return
  }
  const celsius = celsiusOf(sensor, record.value)
  if (celsius === undefined || !(celsius >= lowestC && celsius <= highestC)) {
    const meaning = unit === 'Cel' || celsius === undefined ? '' : ` (${celsius.toFixed(1)} °C)`
    refuse(
      decoded,
      record,
      'value-out-of-range',
      `${record.value} ${unit}${meaning} is not between ${lowestC} and ${highestC} °C`,
    )
    return
  }
  decoded.readings.push({ channelId: channel.id, atMs, value: record.value, celsius, receivedAtMs: nowMs })
}

function refuse(decoded: Decoded, record: ResolvedRecord, reason: RejectionReason, detail: string): void {
  decoded.refused.push({ reason, detail, record: textOf(record) })
}

/** A number about the device itself; undefined when it was refused. */
function takeState(
  record: ResolvedRecord,
  unit: string,
  lowest: number,
  highest: number,
  refused: Refused[],
): number | undefined {
  if (record.unit !== unit) {
    const detail = `“${record.name}” is sent in ${unit}, not in ${record.unit ?? 'no unit'}`
    refused.push({ reason: 'wrong-unit', detail, record: textOf(record) })
  } else if (record.value < lowest || record.value > highest) {
    const detail = `${record.value} ${unit} is not between ${lowest} and ${highest}`
    refused.push({ reason: 'value-out-of-range', detail, record: textOf(record) })
  } else {
    return record.value
  }
  return undefined
}

function textOf(record: ResolvedRecord): string {
  const { name, unit, value, timeMs } = record
  return JSON.stringify({ n: name, u: unit, v: value, t: timeMs === undefined ? undefined : timeMs / 1000 })
}

function timeText(ms: number): string {
  return Math.abs(ms) <= 8.64e15 ? new Date(ms).toISOString() : `the time ${ms / 1000}`
}

const maxRecordText = 1000
