/** A house's day turns when the night crew goes home, not at midnight: local hour (common practice). */
export const dayTurnsAtHour = 5

/**
 * The business day that a moment belongs to at a place, as `YYYY-MM-DD`: the local date, but the day before until
 * 05:00. Wall-clock hours count, so the day a clock is changed is an hour shorter or longer.
 * @param timeZone IANA name; an unknown one is a RangeError
 * @example businessDay(Date.parse('2026-12-01T09:30:00Z'), 'America/Chicago') // '2026-11-30': it is 03:30 there
 */
export function businessDay(ms: number, timeZone: string): string {
  const parts = new Intl.DateTimeFormat('en-US', {
    timeZone,
    calendar: 'gregory',
    numberingSystem: 'latn',
    year: 'numeric',
    month: 'numeric',
    day: 'numeric',
    hour: 'numeric',
    hourCycle: 'h23',
  }).formatToParts(ms)
  const part = (type: Intl.DateTimeFormatPartTypes) =>
    Number(parts.find((candidate) => candidate.type === type)?.value)
  const turned = part('hour') >= dayTurnsAtHour ? 0 : 1
  // Day 0 of a month is the last one of the month before.
  return new Date(Date.UTC(part('year'), part('month') - 1, part('day') - turned)).toISOString().slice(0, 10)
}
