const minute = 60_000
const day = 24 * 60

/**
 * The moment nearest to `reference` (ms since 1970 UTC) at which the site's clock shows a time such as `23:50`, not
 * after `notAfter`; undefined when there is none within a day. On the night the clocks go back the nearer of the two
 * is taken. `clockOf` gives the site's clock at a moment.
 */
export function nearestClock(
  clock: string,
  options: { reference: number; notAfter: number; clockOf: (at: number) => string },
): number | undefined {
  const base = Math.floor(options.reference / minute) * minute
  for (let away = 0; away <= day; away++) {
    for (const at of away === 0 ? [base] : [base - away * minute, base + away * minute]) {
      if (at <= options.notAfter && options.clockOf(at) === clock) return at
    }
  }
  return undefined
}
