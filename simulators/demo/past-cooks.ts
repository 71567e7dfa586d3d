import { seededRandom, type Random } from '#shared/domain/random.ts'
import { DateTime } from 'luxon'

import { fireEvents, meatSeries, pitSeries, type ChannelSeries } from '../channel-series.ts'
import { createHouseModel } from '../house-model.ts'
import { runNight, type PlannedPiece } from '../night-run.ts'
import { joinSeries, portionsOf, toDemoPiece, type DemoCookerEvent, type DemoNights } from './demo-night.ts'
import { demoRecipes, demoSites, pieceLabel, type DemoCooker, type DemoSite } from './house.ts'

/**
 * Finished cooks of the weeks before a moment: about four pieces a night, none on a Monday, each night cooked
 * towards eleven in the morning. All is over before `before` (ms since 1970 UTC). The same arguments give the same
 * cooks. Readings are one a minute.
 */
export function pastCooks(options: { seed: number | string; before: number; count: number }): DemoNights {
  const { before, count } = options
  const houseSeed = String(options.seed)
  const nights: DemoNights[] = []
  let cooked = 0
  for (let back = 0; cooked < count; back++) {
    const servesMs = serviceHour(before, back)
    if (servesMs === undefined) continue
    const night = cookNight(houseSeed, servesMs, count - cooked)
    cooked += night.pieces.length
    nights.unshift(night)
  }
  return {
    services: nights.flatMap((night) => night.services),
    pieces: nights.flatMap((night) => night.pieces),
    cookerEvents: nights.flatMap((night) => night.cookerEvents),
    series: joinSeries(nights.flatMap((night) => night.series)),
  }
}

/** Eleven o'clock of the day that lies `back` days before the last one that is over; none on a Monday. */
function serviceHour(before: number, back: number): number | undefined {
  const zone = demoSites[0]?.timeZone ?? 'utc'
  const day = DateTime.fromMillis(before - CLEARED_MS, { zone })
  const last = day.hour >= 11 ? day : day.minus({ days: 1 })
  const serves = last.minus({ days: back }).set({ hour: 11, minute: 0, second: 0, millisecond: 0 })
  return serves.weekday === 1 ? undefined : serves.toMillis()
}

function cookNight(houseSeed: string, servesMs: number, most: number): DemoNights {
  const random = seededRandom(houseSeed, 'night', servesMs)
  const model = createHouseModel({ houseSeed, sites: demoSites })
  const cookerEvents: DemoCookerEvent[] = []
  const plans: PlannedPiece[] = []
  const size = Math.min(most, 3 + Math.floor(3 * random.uniform()))
  for (let turn = 0; turn < size; turn++) {
    const plan = planPiece(random, servesMs, plans)
    plans.push(plan)
  }
  for (const site of demoSites) {
    for (const cooker of site.cookers) {
      const sets = setsOfTheNight(random, cooker, site, plans, servesMs)
      for (const event of sets) {
        model.pitSet(site.slug, cooker.name, event.atMs, event.fact.pitSetC)
        cookerEvents.push({ ...event, site: site.slug, cooker: cooker.name })
      }
    }
  }
  const pieces = runNight({ model, plans, untilMs: servesMs + CLEARED_MS })
  const series: ChannelSeries[] = []
  for (const site of demoSites) {
    for (const cooker of site.cookers) {
      const span = timeInUse(pieces.map(toDemoPiece), site.slug, cooker.name)
      if (span === undefined) continue
      series.push(...pitSeries({ model, site, cooker: cooker.name, ...span, everyS: 60 }))
      for (const event of fireEvents(houseSeed, site, cooker.name, span.fromMs, span.untilMs)) {
        cookerEvents.push({ ...event, site: site.slug, cooker: cooker.name })
      }
    }
  }
  for (const piece of pieces) {
    series.push(...meatSeries({ houseSeed, piece, everyS: 60, untilMs: servesMs + CLEARED_MS }))
  }
  const finished = pieces.map(toDemoPiece)
  return {
    services: demoSites.flatMap(({ slug }) => {
      const ofSite = finished.filter((piece) => piece.site === slug)
      return ofSite.length > 0 ? [{ site: slug, servesMs, portions: portionsOf(ofSite) }] : []
    }),
    pieces: finished.sort((a, b) => a.onMs - b.onMs),
    cookerEvents: cookerEvents.sort((a, b) => a.atMs - b.atMs),
    series,
  }
}

/** Plans one more piece of a night: a recipe, a cooker that is run for it with a free probe, and when it goes on. */
function planPiece(random: Random, servesMs: number, planned: readonly PlannedPiece[]): PlannedPiece {
  const recipe = pick(random, recipesByHabit)
  const places = demoSites.flatMap((site) =>
    site.cookers
      .filter((cooker) => cooker.pitSetC === recipe.pitSetC && cooker.kind !== 'holding')
      .map((cooker) => ({ site, cooker, count: countOn(planned, site, cooker) })),
  )
  const free = places.filter(({ cooker, count }) => count < Math.min(cooker.capacity, 3))
  const place = pick(random, free.length > 0 ? free : places)
  const { site, cooker, count } = place
  const rawKg = drawRawKg(random, recipe.typicalKg)
  const slackHours = 1.2 + 2 * random.uniform()
  // Never before the last night's pieces are off the boards.
  const hours = Math.min(19.5, recipe.plannedHours * (rawKg / recipe.typicalKg) ** 0.4 + 0.7 + slackHours)
  const onMs = Math.floor((servesMs - hours * HOUR_MS) / (5 * MINUTE_MS)) * 5 * MINUTE_MS
  const others = site.cookers.filter(({ kind, name }) => kind === 'cabinet' && name !== cooker.name)
  return {
    identity: {
      site: site.slug,
      label: pieceLabel(cooker.mark, count + 1),
      cured: recipe.cured,
      cut: recipe.cut,
      rawKg,
      onMs,
    },
    recipe,
    cooker: cooker.name,
    servesMs,
    ...(cooker.kind === 'offset' && random.uniform() < 0.12 ? { movesTo: others[0]?.name } : {}),
  }
}

/** On some nights a fire was run hotter or cooler than it usually is; it is set back when the meat is off. */
function setsOfTheNight(
  random: Random,
  cooker: DemoCooker,
  site: DemoSite,
  plans: readonly PlannedPiece[],
  servesMs: number,
) {
  const first = plans.filter((plan) => plan.identity.site === site.slug && plan.cooker === cooker.name)
  if (first.length === 0 || cooker.kind === 'holding' || random.uniform() >= 0.3) return []
  const pitSetC = Math.round((cooker.pitSetC + (random.uniform() < 0.6 ? 5.6 : -5.6)) * 10) / 10
  const fromMs = Math.min(...first.map((plan) => plan.identity.onMs)) - 45 * MINUTE_MS
  const by = 'odell@quarryroad.example'
  return [
    { atMs: fromMs, recordedMs: fromMs, by, fact: { kind: 'pit_set' as const, pitSetC } },
    {
      atMs: servesMs + CLEARED_MS,
      recordedMs: servesMs + CLEARED_MS,
      by,
      fact: { kind: 'pit_set' as const, pitSetC: cooker.pitSetC },
    },
  ]
}

/** From the first piece on a cooker to the last off it; the cabinets where meat is held are read too. */
function timeInUse(pieces: readonly DemoNights['pieces'][number][], site: string, cooker: string) {
  let fromMs = Infinity
  let untilMs = -Infinity
  for (const piece of pieces.filter((each) => each.site === site)) {
    let place: string | undefined
    for (const { fact, atMs } of piece.events) {
      if (place === cooker) untilMs = Math.max(untilMs, atMs)
      if (fact.kind === 'on') place = fact.cooker
      if (fact.kind === 'moved') place = fact.toCooker
      if (fact.kind === 'pull' || fact.kind === 'rest' || fact.kind === 'sliced') place = undefined
      if (fact.kind === 'hold') place = fact.cooker
      if (place === cooker) fromMs = Math.min(fromMs, atMs)
    }
  }
  return untilMs > fromMs ? { fromMs, untilMs } : undefined
}

function countOn(planned: readonly PlannedPiece[], site: DemoSite, cooker: DemoCooker): number {
  return planned.filter((plan) => plan.identity.site === site.slug && plan.cooker === cooker.name).length
}

/** A raw weight as it comes from the box: near the usual, to ten grams. */
export function drawRawKg(random: Random, typicalKg: number): number {
  const share = Math.min(1.3, Math.max(0.74, 1 + 0.12 * random.normal()))
  return Math.round(typicalKg * share * 100) / 100
}

function pick<T>(random: Random, choices: readonly T[]): T {
  const chosen = choices[Math.floor(random.uniform() * choices.length)]
  if (chosen === undefined) throw new RangeError('There is nothing to choose from.')
  return chosen
}

/** The house sells brisket first of all. */
const recipesByHabit = demoRecipes.flatMap((recipe) => {
  const times: Record<string, number> = {
    'house-brisket': 5,
    'overnight-low-brisket': 3,
    'peppered-pastrami': 2,
  }
  return Array.from({ length: times[recipe.slug] ?? 1 }, () => recipe)
})

const MINUTE_MS = 60_000
const HOUR_MS = 3_600_000
/** By so long after the service everything is sliced: the last piece is pulled two and a half hours after it. */
const CLEARED_MS = 3.5 * HOUR_MS
