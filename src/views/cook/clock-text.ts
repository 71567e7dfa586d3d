/**
 * Reads a clock as people write it: `23:50`, `2350`, `23.50`, `9:05`, `905`. Gives `HH:MM`, or null for what is not
 * a time of the day.
 */
export function clockText(written: string): string | null {
  const match = /^\s*(\d{1,2})[:.h ]?(\d{2})\s*$/.exec(written)
  if (match === null) return null
  const hours = Number(match[1])
  const minutes = Number(match[2])
  if (hours > 23 || minutes > 59) return null
  return `${String(hours).padStart(2, '0')}:${String(minutes).padStart(2, '0')}`
}
