import type { Tonight } from '#shared/contract/site.ts'
import { seededRandom } from '#shared/domain/random.ts'

import type { CrewAction } from './crew.ts'
import { portionsOf } from './demo/demo-night.ts'
import { demoSites, findRecipe, pieceLabel, type DemoRecipe } from './demo/house.ts'
import { drawRawKg } from './demo/past-cooks.ts'
import { freeProbe } from './free-probe.ts'
import type { SiteState } from './live/house-state.ts'
import { stableUuid } from './live/stable-uuid.ts'

/** What a service says that the crew planned itself: its pieces are theirs to start. */
export const CREW_SERVICE_NOTE = 'Planned when the boards were cleared.'

/** A piece that the crew means to put on. */
export interface NightPiece {
  label: string
  recipe: DemoRecipe
  cooker: string
  rawKg: number
  onMs: number
}

/**
 * What there is to do for the night to come: once everything is sliced, a service some fifteen hours ahead; and
 * for a service planned that way, each of its pieces when its hour has come.
 */
export function planNight(options: { houseSeed: string; state: SiteState; nowMs: number }): CrewAction[] {
  const { houseSeed, state, nowMs } = options
  const { tonight } = state
  const site = tonight.site.slug
  const planned = tonight.services.find((service) => {
    return service.note === CREW_SERVICE_NOTE && Date.parse(service.servesAt) > nowMs + HOUR_MS
  })
  if (planned !== undefined) {
    const servesMs = Date.parse(planned.servesAt)
    return nightPieces(houseSeed, site, servesMs)
      .filter((piece) => piece.onMs <= nowMs && nowMs - piece.onMs < LATEST_START_MS)
      .filter(
        (piece) =>
          !tonight.pieces.some((other) => other.serviceId === planned.id && other.label === piece.label),
      )
      .flatMap((piece) => start(houseSeed, state, piece, planned.id, servesMs))
  }
  if (tonight.pieces.some((piece) => piece.onAt !== null)) return []
  const servesMs = Math.ceil((nowMs + AHEAD_MS) / HALF_HOUR_MS) * HALF_HOUR_MS
  const pieces = nightPieces(houseSeed, site, servesMs)
  if (pieces.length === 0) return []
  const servesAt = new Date(servesMs).toISOString()
  return [{ kind: 'add-service', site, servesAt, portions: portionsOf(pieces), note: CREW_SERVICE_NOTE }]
}

/** The pieces of a night at a site, the same whenever they are asked for. */
export function nightPieces(houseSeed: string, site: string, servesMs: number): NightPiece[] {
  const random = seededRandom(houseSeed, 'plan', site, servesMs)
  const turns = new Map<string, number>()
  return lineUp.flatMap(({ at, cooker, recipe: slug }) => {
    const recipe = findRecipe(slug)
    const mark = demoSites.find((each) => each.slug === at)?.cookers.find(({ name }) => name === cooker)?.mark
    if (recipe === undefined || mark === undefined || at !== site) return []
    const turn = (turns.get(cooker) ?? 0) + 1
    turns.set(cooker, turn)
    const rawKg = drawRawKg(random, recipe.typicalKg)
    const hours = Math.min(14.8, recipe.plannedHours + 1 + random.uniform())
    const onMs = Math.floor((servesMs - hours * HOUR_MS) / (5 * MINUTE_MS)) * 5 * MINUTE_MS
    return [{ label: pieceLabel(mark, turn), recipe, cooker, rawKg, onMs }]
  })
}

function start(
  houseSeed: string,
  { tonight, recipes }: SiteState,
  piece: NightPiece,
  serviceId: number,
  servesMs: number,
): CrewAction[] {
  const site = tonight.site.slug
  const recipeId = recipes.find(({ slug }) => slug === piece.recipe.slug)?.id
  const cooker = tonight.cookers.find(({ name }) => name === piece.cooker)
  if (recipeId === undefined || cooker === undefined) return []
  const channelId = freeProbe(tonight, cooker)
  return [
    {
      kind: 'start-piece',
      site,
      start: {
        eventId: stableUuid(houseSeed, 'crew', site, servesMs, piece.label),
        label: piece.label,
        recipeId,
        cookerId: cooker.id,
        rawKg: piece.rawKg,
        onAt: new Date(piece.onMs).toISOString(),
        serviceId,
        ...(channelId === undefined ? {} : { channelId }),
      },
    },
  ]
}

const lineUp: { at: Tonight['site']['slug']; cooker: string; recipe: string }[] = [
  { at: 'quarry-road', cooker: 'North Offset', recipe: 'house-brisket' },
  { at: 'quarry-road', cooker: 'North Offset', recipe: 'house-brisket' },
  { at: 'quarry-road', cooker: 'South Offset', recipe: 'overnight-low-brisket' },
  { at: 'quarry-road', cooker: 'Old Rotisserie', recipe: 'peppered-pastrami' },
  { at: 'quarry-road', cooker: 'Old Rotisserie', recipe: 'short-rib' },
  { at: 'quarry-road', cooker: 'Cabinet One', recipe: 'house-brisket' },
  { at: 'quarry-road', cooker: 'Cabinet One', recipe: 'beef-cheeks' },
  { at: 'mill-yard', cooker: 'Long Offset', recipe: 'house-brisket' },
  { at: 'mill-yard', cooker: 'Long Offset', recipe: 'house-brisket' },
  { at: 'mill-yard', cooker: 'Cabinet Two', recipe: 'overnight-low-brisket' },
  { at: 'mill-yard', cooker: 'Cabinet Three', recipe: 'peppered-pastrami' },
]

const MINUTE_MS = 60_000
const HOUR_MS = 3_600_000
const HALF_HOUR_MS = HOUR_MS / 2
const AHEAD_MS = 14.8 * HOUR_MS
/** A piece that should have gone on so long ago is left for another night. */
const LATEST_START_MS = 1.5 * HOUR_MS
