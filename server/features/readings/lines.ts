import type { Knex } from 'knex'
import { celsiusOf, type Sensor, type SensorSpan } from '#shared/domain/sensor.ts'
import { givenUpBefore } from '../../history/drop-old-partitions.ts'
import { cutAtSensors, windowsOf, type LinePart } from './cuts.ts'
import { readSteps, type StoredStep } from './line-queries.ts'
import type { Resolution } from './resolution.ts'

/** A step of a line: the mean of its readings and their extremes, in °C. */
export interface LinePoint {
  /** The middle of its readings, ms since 1970 UTC. */
  atMs: number
  celsius: number
  low: number
  high: number
}

/**
 * The points of lines, each a sequence of parts, in °C by the sensor of each time. Steps are cut at the same moments
 * for every line, so that the lines of one chart stand below each other; a step has one point, whatever changed in it.
 *
 * @returns for each line its points, from the oldest on
 */
export async function readLines(
  db: Knex,
  lines: readonly (readonly LinePart[])[],
  { source, stepMs }: Resolution,
  sensorsOf: (channelIds: readonly number[]) => Promise<Map<number, SensorSpan[]>>,
): Promise<LinePoint[][]> {
  const parts = lines.flatMap((line, index) => line.map((part) => ({ ...part, line: index })))
  const [sensors, areReadingsGone] = await Promise.all([
    sensorsOf([...new Set(parts.map(({ channelId }) => channelId))]),
    source === 'readings' ? areGivenUp(db, parts) : Promise.resolve(false),
  ])
  const usable = areReadingsGone ? 'minutes' : source
  const cuts = parts.flatMap((part) =>
    cutAtSensors(part, sensors.get(part.channelId) ?? []).map((cut) => ({ ...cut, part })),
  )
  const windows = cuts.flatMap((cut, place) => windowsOf(cut, cut.part, place, usable))
  const steps: StoredStep[][] = lines.map(() => [])
  for (const stored of await readSteps(db, cuts, windows, stepMs)) {
    const cut = cuts[stored.place]
    const step = cut && inCelsius(stored, cut.sensor)
    if (step) steps[cut.part.line]?.push(step)
  }
  return steps.map((ofLine) => onePointAStep(ofLine, stepMs))
}

/** Whether some of the readings asked for are no more, so that only their minutes can be drawn. */
async function areGivenUp(db: Knex, parts: readonly LinePart[]): Promise<boolean> {
  const before = await givenUpBefore(db)
  return before !== undefined && parts.some(({ fromMs }) => fromMs < before)
}

/** The curve of a thermistor falls: its lowest value is the highest temperature. */
function inCelsius(step: StoredStep, sensor: Sensor): StoredStep | undefined {
  const mean = sensor.kind === 'thermistor' ? step.mean + sensor.offsetC : celsiusOf(sensor, step.mean)
  const one = celsiusOf(sensor, step.low)
  const other = celsiusOf(sensor, step.high)
  if (mean === undefined || one === undefined || other === undefined) return undefined
  // Field by field: spreading the rest of an object took longer than all else here together.
  return {
    place: step.place,
    atMs: step.atMs,
    count: step.count,
    mean,
    low: Math.min(one, other),
    high: Math.max(one, other),
  }
}

/** Steps in the order of time; those that fall into the same one, of two probes or sensors, become one point. */
function onePointAStep(steps: StoredStep[], stepMs: number): LinePoint[] {
  steps.sort((a, b) => a.atMs - b.atMs)
  const points: StoredStep[] = []
  for (const step of steps) {
    const before = points.at(-1)
    if (before && Math.floor(before.atMs / stepMs) === Math.floor(step.atMs / stepMs)) {
      points[points.length - 1] = joined(before, step)
    } else points.push(step)
  }
  return points.map(({ atMs, mean, low, high }) => ({ atMs: Math.round(atMs), celsius: mean, low, high }))
}

function joined(one: StoredStep, other: StoredStep): StoredStep {
  const count = one.count + other.count
  const meanOf = (a: number, b: number) => (a * one.count + b * other.count) / count
  return {
    place: one.place,
    atMs: meanOf(one.atMs, other.atMs),
    count,
    mean: meanOf(one.mean, other.mean),
    low: Math.min(one.low, other.low),
    high: Math.max(one.high, other.high),
  }
}
