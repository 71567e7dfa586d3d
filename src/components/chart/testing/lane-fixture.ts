import type { LaneData, LanePiece, Line, Reach, Say } from '../lane-data.ts'

const minute = 60_000
const hour = 60 * minute

/** The moment the fixtures play at: 01:10 at a house in Chicago. */
export const fixtureNow = Date.parse('2026-12-02T07:10:00Z')

/** A made-up brisket's core temperature after some hours, °C: rise, stall near 68 °C, push. For tests only. */
export function coreAfter(hours: number, stallHours = 3): number {
  const rise = 68 - 64 * Math.exp(-hours / 2)
  const beyond = Math.max(0, hours - 5 - stallHours)
  return Math.min(97, rise + beyond * 6.5 * (1 - Math.exp(-beyond)))
}

/** A line sampled once a minute from a start to an end. */
export function lineOf(from: number, to: number, valueAt: (hours: number) => number): Line {
  const points: [number, number][] = []
  for (let at = from; at <= to; at += minute) points.push([at, valueAt((at - from) / hour)])
  return points
}

/** A piece that has been cooking for some hours, with a forecast of its pull. */
export function cookingPiece(id: number, hoursOn: number, change: Partial<LanePiece> = {}): LanePiece {
  const now = fixtureNow
  const line = lineOf(now - hoursOn * hour, now, (hours) => coreAfter(hours))
  const c = line.at(-1)?.[1] ?? 0
  const left = Math.max(0.5, 12.6 - hoursOn)
  const pull = reachIn(left)
  return {
    id,
    label: `N${id}`,
    stage: 'cooking',
    phase: 'stall',
    wrapAtC: 74,
    pullAtC: 95,
    line,
    probed: true,
    follows: null,
    latest: { at: now, c },
    silentSince: null,
    fan: fanTo(c, left, pull),
    wrap: c < 74 ? reachIn(left * 0.4) : null,
    pull,
    reason: null,
    risk: null,
    pulledAt: null,
    restAt: null,
    holdAt: null,
    doneAt: null,
    ...change,
  }
}

/** A piece that rests or is held. */
export function restingPiece(id: number, change: Partial<LanePiece> = {}): LanePiece {
  const pulledAt = fixtureNow - 2 * hour
  const line = lineOf(pulledAt - 3 * hour, fixtureNow, (hours) =>
    hours < 3 ? 80 + hours * 5 : 95 - (hours - 3) * 9,
  )
  return cookingPiece(id, 5, {
    stage: 'resting',
    phase: 'done',
    line,
    latest: { at: fixtureNow, c: 77 },
    fan: [],
    wrap: null,
    pull: null,
    reason: 'already-pulled',
    pulledAt,
    restAt: pulledAt,
    ...change,
  })
}

/** A lane with these pieces, a service in ten hours, and a pit that left its band for a while. */
export function laneOf(pieces: LanePiece[], change: Partial<LaneData> = {}): LaneData {
  const from = fixtureNow - 8 * hour
  return {
    window: { from, now: fixtureNow, to: fixtureNow + 12 * hour },
    services: [fixtureNow + 10 * hour - 10 * minute],
    pit: {
      line: lineOf(
        from,
        fixtureNow,
        (hours) => 121 + 4 * Math.sin(hours * 5) - (hours > 5 && hours < 5.6 ? 22 : 0),
      ),
      bands: [{ from: -Infinity, band: { bandLowC: 112, bandHighC: 130 } }],
      silentSince: null,
    },
    pieces,
    marks: [
      { kind: 'fire', at: fixtureNow - 2 * hour, pieceId: null },
      ...pieces.map((piece) => ({ kind: 'spritz' as const, at: fixtureNow - 3 * hour, pieceId: piece.id })),
    ],
    ...change,
  }
}

/** Plain words in place of a language's. */
export const plainSay: Say = {
  words: (key, values) => [key.split('.').at(-1), ...Object.values(values ?? {})].join(' '),
  temperature: (c) => `${Math.round(c * 1.8 + 32)} °F`,
  temperatureSpan: (low, high) => `${Math.round(low * 1.8 + 32)} to ${Math.round(high * 1.8 + 32)} °F`,
  clock: (at) => clock.format(at),
  interval: (from, to) => `${clock.format(from)} to ${clock.format(to)}`,
  duration: (ms) => `${Math.round(ms / minute)} min`,
  levels: [100, 150].map((fahrenheit) => (fahrenheit - 32) / 1.8),
}

const clock = new Intl.DateTimeFormat('en-GB', {
  timeZone: 'America/Chicago',
  hour: '2-digit',
  minute: '2-digit',
  hourCycle: 'h23',
})

function reachIn(hours: number): Reach {
  const at = (share: number) => fixtureNow + hours * share * hour
  return { p10: at(0.85), p50: at(1), p90: at(1.25) }
}

function fanTo(c: number, hours: number, pull: Reach): LanePiece['fan'] {
  const slices = []
  for (let at = fixtureNow; at <= pull.p90 + 15 * minute; at += 15 * minute) {
    const done = (at - fixtureNow) / hour / hours
    const level = (share: number) => c + (95 - c) * Math.min(1.08, Math.max(0, done * share) ** 1.3)
    slices.push({ at, p10: level(0.78), p25: level(0.9), p50: level(1), p75: level(1.08), p90: level(1.2) })
  }
  return slices
}
