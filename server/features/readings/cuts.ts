import type { Sensor, SensorSpan } from '#shared/domain/sensor.ts'
import type { Source } from './resolution.ts'

/** A part of a line: one channel over a half-open span, in milliseconds since 1970 UTC. */
export interface LinePart {
  channelId: number
  fromMs: number
  toMs: number
}

/** A part during which one sensor hung on its channel. */
export interface Cut extends LinePart {
  sensor: Sensor
}

/** A half-open span of a cut, in milliseconds since 1970 UTC, and where it is read from. */
export interface Window {
  source: Source
  /** Which cut. */
  place: number
  fromMs: number
  toMs: number
}

const minuteMs = 60 * 1000
const quarterMs = 15 * minuteMs

/** A part in the pieces during which one sensor hung on its channel, oldest first. */
export function cutAtSensors(part: LinePart, spans: readonly SensorSpan[]): Cut[] {
  return spans
    .map(({ fromMs, toMs, sensor }) => ({
      channelId: part.channelId,
      fromMs: Math.max(part.fromMs, fromMs),
      toMs: Math.min(part.toMs, toMs),
      sensor,
    }))
    .filter(({ fromMs, toMs }) => fromMs < toMs)
    .sort((a, b) => a.fromMs - b.fromMs)
}

/**
 * Where a cut is read from. Of a roll-up only what lies wholly within the cut: what reaches over its ends is read from
 * the next finer one, since a minute in which a sensor was changed holds ohms and degrees alike. Only at the ends of
 * the whole part a minute that began within it counts as a whole.
 */
export function windowsOf(cut: Cut, part: LinePart, place: number, source: Source): Window[] {
  const whole = { source: 'readings' as const, place, fromMs: cut.fromMs, toMs: cut.toMs }
  if (source === 'readings') return [whole]
  const [from, to] = [up(cut.fromMs, minuteMs), (cut.toMs === part.toMs ? up : down)(cut.toMs, minuteMs)]
  if (from >= to) return [whole]
  const [firstQuarter, endOfQuarters] = [up(from, quarterMs), down(to, quarterMs)]
  const byQuarters = source === 'quarters' && firstQuarter < endOfQuarters
  const [inner, outer] = byQuarters ? [firstQuarter, endOfQuarters] : [to, to]
  const windows: Window[] = [
    { source: 'readings', place, fromMs: cut.fromMs === part.fromMs ? from : cut.fromMs, toMs: from },
    { source: 'minutes', place, fromMs: from, toMs: inner },
    { source: 'quarters', place, fromMs: inner, toMs: outer },
    { source: 'minutes', place, fromMs: outer, toMs: to },
    { source: 'readings', place, fromMs: to, toMs: cut.toMs },
  ]
  return windows.filter(({ fromMs, toMs }) => fromMs < toMs)
}

function up(ms: number, unitMs: number): number {
  return Math.ceil(ms / unitMs) * unitMs
}

function down(ms: number, unitMs: number): number {
  return Math.floor(ms / unitMs) * unitMs
}
