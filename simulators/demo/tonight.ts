import { seededRandom } from '#shared/domain/random.ts'

import { meatSeries, pitSeries, fireEvents } from '../channel-series.ts'
import { createHouseModel } from '../house-model.ts'
import { runNight, type CookedPiece, type PlannedPiece } from '../night-run.ts'
import { joinSeries, portionsOf, toDemoPiece, type DemoNights } from './demo-night.ts'
import { demoSites, findRecipe, findSite } from './house.ts'
import { nightParts, type NightPart } from './night-parts.ts'
import { drawRawKg } from './past-cooks.ts'

/** Tonight's pieces as they stand, and since when the night has been going. */
export interface DemoTonight extends DemoNights {
  /** The earliest moment in it; past cooks must be over by then. */
  startsMs: number
}

/**
 * The night that is going on at `now` (ms since 1970 UTC): pieces in every part of a cook on seven cookers and in
 * both holding places, towards a service in about eight hours, with events and readings up to now. Meat is read every
 * 15 s, pits every 30 s. The same arguments give the same night, and `createHouseModel` told of the same pieces and
 * events carries it on without a seam.
 */
export function tonight(options: { seed: number | string; now: number }): DemoTonight {
  const now = Math.floor(options.now / MINUTE_MS) * MINUTE_MS
  const houseSeed = String(options.seed)
  const servesMs = Math.round((now + 8 * HOUR_MS) / (HOUR_MS / 2)) * (HOUR_MS / 2)
  const plans = lineUp.map((wanted) => findPlan(houseSeed, wanted, now, servesMs))
  const model = createHouseModel({ houseSeed, sites: demoSites })
  const cooked = runNight({ model, plans, untilMs: now })
  const pieces = cooked.map(toDemoPiece).map((piece) => ({
    ...piece,
    events: piece.events.map((event) => ({ ...event, recordedMs: Math.min(event.recordedMs, options.now) })),
  }))
  const startsMs = Math.min(...pieces.map(({ onMs }) => onMs)) - HOUR_MS
  const pits = demoSites.flatMap((site) => site.cookers.map(({ name }) => ({ site, cooker: name })))
  return {
    startsMs,
    services: demoSites.map(({ slug }) => {
      return { site: slug, servesMs, portions: portionsOf(pieces.filter(({ site }) => site === slug)) }
    }),
    pieces,
    cookerEvents: pits.flatMap(({ site, cooker }) => {
      return fireEvents(houseSeed, site, cooker, startsMs + HOUR_MS, now).map((event) => {
        return { ...event, site: site.slug, cooker }
      })
    }),
    series: joinSeries([
      ...pits.flatMap(({ site, cooker }) => {
        return pitSeries({ model, site, cooker, fromMs: startsMs, untilMs: options.now, everyS: 30 })
      }),
      ...cooked.flatMap((piece) => meatSeries({ houseSeed, piece, everyS: 15, untilMs: options.now })),
    ]),
  }
}

/** A piece wanted in a certain part of its cook. */
interface WantedPiece {
  label: string
  site: string
  cooker: string
  recipe: string
  part: NightPart
}

const lineUp: WantedPiece[] = [
  wanted('N1', 'quarry-road', 'North Offset', 'house-brisket', 'deep-stall'),
  wanted('N2', 'quarry-road', 'North Offset', 'house-brisket', 'just-wrapped'),
  wanted('S1', 'quarry-road', 'South Offset', 'overnight-low-brisket', 'near-wrap'),
  wanted('R1', 'quarry-road', 'Old Rotisserie', 'short-rib', 'rise'),
  wanted('R2', 'quarry-road', 'Old Rotisserie', 'peppered-pastrami', 'late-rise'),
  wanted('R3', 'quarry-road', 'Old Rotisserie', 'peppered-pastrami', 'held'),
  wanted('1a', 'quarry-road', 'Cabinet One', 'house-brisket', 'push'),
  wanted('1b', 'quarry-road', 'Cabinet One', 'beef-cheeks', 'late-rise'),
  wanted('L1', 'mill-yard', 'Long Offset', 'house-brisket', 'deep-stall'),
  wanted('L2', 'mill-yard', 'Long Offset', 'house-brisket', 'near-pull'),
  wanted('2a', 'mill-yard', 'Cabinet Two', 'overnight-low-brisket', 'push'),
  wanted('3a', 'mill-yard', 'Cabinet Three', 'peppered-pastrami', 'resting'),
  wanted('L3', 'mill-yard', 'Long Offset', 'house-brisket', 'held'),
]

function wanted(label: string, site: string, cooker: string, recipe: string, part: NightPart): WantedPiece {
  return { label, site, cooker, recipe, part }
}

/**
 * Finds when a piece must have gone on to be in the wanted part now: cooked once, its start is shifted by what was
 * missing, and again, until it stands there. A piece that never comes into that part (one without a stall)
 * gives way to one of another weight.
 */
function findPlan(houseSeed: string, wish: WantedPiece, now: number, servesMs: number): PlannedPiece {
  const recipe = findRecipe(wish.recipe)
  if (recipe === undefined) throw new RangeError(`There is no recipe ${wish.recipe}.`)
  const { cured, cut, plannedHours } = recipe
  const { label, site, cooker } = wish
  const part = nightParts[wish.part]
  for (let attempt = 0; attempt < 40; attempt++) {
    const random = seededRandom(houseSeed, 'tonight', label, attempt)
    const rawKg = drawRawKg(random, recipe.typicalKg)
    let onMs = now - plannedHours * 0.6 * HOUR_MS
    for (let turn = 0; turn < 6; turn++) {
      onMs = Math.floor(onMs / MINUTE_MS) * MINUTE_MS
      const identity = { site, label, cured, cut, rawKg, onMs }
      const plan: PlannedPiece = { identity, recipe, cooker, servesMs }
      if (turn > 0 && part.holds(cookAlone(houseSeed, plan, now), recipe, now)) return plan
      // The crew pulls by feel only for a service that is near: the trial is not.
      const trial = { ...plan, servesMs: onMs + 36 * HOUR_MS }
      const moment = part.moment(cookAlone(houseSeed, trial, onMs + 26 * HOUR_MS), recipe)
      if (moment === undefined) break
      onMs += now - moment
    }
  }
  throw new Error(`No ${wish.recipe} could be found in the part ${wish.part}.`)
}

function cookAlone(houseSeed: string, plan: PlannedPiece, untilMs: number): CookedPiece {
  const site = findSite(plan.identity.site)
  const model = createHouseModel({ houseSeed, sites: [site] })
  const [piece] = runNight({ model, plans: [plan], untilMs })
  if (piece === undefined) throw new Error('The night had no piece in it.')
  return piece
}

const MINUTE_MS = 60_000
const HOUR_MS = 3_600_000
