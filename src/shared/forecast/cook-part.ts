/** The parts of a cook by a fixed rule on the readings, for judging forecasts: never by the model's own label. */
export const cookParts = ['under 38', '38–60', '60–68', '68–77', '77–85', 'above 85'] as const
export type CookPart = (typeof cookParts)[number]

/** The part that a core temperature lies in, as an index into `cookParts`. */
export function cookPartOf(coreC: number): number {
  if (coreC < 38) return 0
  if (coreC < 60) return 1
  if (coreC < 68) return 2
  if (coreC < 77) return 3
  return coreC < 85 ? 4 : 5
}
