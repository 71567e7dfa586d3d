/** Most lanes on one page of the wall, so that each stays at least 90 px high at 1080. */
export const lanesAPage = 8

/** How long a page of the wall stands. */
export const pageMs = 20_000

/**
 * Shares lanes out over pages. A lane with something abnormal stands on every page; the others take turns. The
 * wall's order is kept on each page.
 */
export function wallPages<T>(
  lanes: readonly T[],
  isAbnormal: (lane: T) => boolean,
  perPage = lanesAPage,
): T[][] {
  if (lanes.length <= perPage) return [[...lanes]]
  const pinned = lanes.filter(isAbnormal)
  const turning = lanes.filter((lane) => !isAbnormal(lane))
  const room = perPage - pinned.length
  // Too much is abnormal for one page: then everything takes turns, the abnormal first.
  if (room < 1) return chunks([...pinned, ...turning], perPage)
  return chunks(turning, room).map((page) => lanes.filter((lane) => isAbnormal(lane) || page.includes(lane)))
}

function chunks<T>(items: readonly T[], size: number): T[][] {
  const pages: T[][] = []
  for (let start = 0; start < items.length; start += size) pages.push(items.slice(start, start + size))
  return pages
}
