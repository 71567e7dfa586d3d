import { createWeather } from './physics/weather.ts'
import { standardPressurePa } from './physics/standard-pressure.ts'
import { doorOpenings } from './door-openings.ts'
import type { DemoSite } from './demo/house.ts'
import { createPieceCurve, placeAfter, type PieceCurve } from './piece-curve.ts'
import type { PieceSurroundings } from './piece-simulation.ts'
import { createPitCurve, type PitCurve } from './pit-curve.ts'
import type { PieceFact, PieceIdentity } from './story.ts'

/** A piece in the model, with what happened to it. */
export interface ModelPiece {
  readonly identity: PieceIdentity
  readonly curve: PieceCurve
  /** Where it stood after the last event that was told, a cooker's name. */
  readonly standsOn: string | undefined
  /** Tells the model what happened: to the meat, and to the pits whose doors it opened. */
  happened(atMs: number, fact: PieceFact): void
}

/** The pits and pieces of all sites as one deterministic whole. */
export interface HouseModel {
  readonly houseSeed: string
  pit(site: string, cooker: string): PitCurve
  /** Tells the model that a pit's set was changed, before that moment was simulated. */
  pitSet(site: string, cooker: string, atMs: number, setC: number): void
  addPiece(identity: PieceIdentity): ModelPiece
}

/** Builds the model; everything in it follows from the house's seed and from what it is told. */
export function createHouseModel(options: { houseSeed: string; sites: readonly ModelSite[] }): HouseModel {
  const { houseSeed, sites } = options
  const bySlug = new Map(sites.map((site) => [site.slug, siteModel(houseSeed, site)]))
  const find = (slug: string) => {
    const site = bySlug.get(slug)
    if (site === undefined) throw new RangeError(`There is no site ${slug}.`)
    return site
  }
  return {
    houseSeed,
    pit: (site, cooker) => find(site).pit(cooker),
    pitSet: (site, cooker, atMs, setC) => find(site).pit(cooker).setTo(atMs, setC),
    addPiece(identity) {
      const site = find(identity.site)
      const curve = createPieceCurve({ houseSeed, piece: identity, surroundings: site.surroundings })
      let standsOn: string | undefined
      return {
        identity,
        curve,
        get standsOn() {
          return standsOn
        },
        happened(atMs, fact) {
          for (const door of doorOpenings(fact, standsOn)) site.pit(door.cooker).openDoor(atMs, door.seconds)
          standsOn = placeAfter(fact, standsOn)
          curve.apply(atMs, fact)
        },
      }
    },
  }
}

/** What the model needs of a site. */
export type ModelSite = Pick<DemoSite, 'slug' | 'elevationM' | 'longitudeDeg'> & {
  cookers: readonly Pick<DemoSite['cookers'][number], 'name' | 'kind' | 'pitSetC'>[]
}

function siteModel(houseSeed: string, site: ModelSite) {
  const { slug, elevationM, longitudeDeg } = site
  // One sky over the whole house: its sites are a few minutes apart.
  const weather = createWeather({ seed: `${houseSeed}/sky`, elevationM, longitudeDeg })
  const pressurePa = standardPressurePa(elevationM)
  const pits = new Map(
    site.cookers.map(({ name, kind, pitSetC }) => [
      name,
      createPitCurve({ seed: pitSeed(houseSeed, slug, name), kind, setC: pitSetC, longitudeDeg, weather }),
    ]),
  )
  const pit = (cooker: string) => {
    const found = pits.get(cooker)
    if (found === undefined) throw new RangeError(`There is no cooker ${cooker} at ${slug}.`)
    return found
  }
  const room: PieceSurroundings = { airC: 24, humidityRatio: 0.009, film: 6, pressurePa }
  // One object for all answers: it is read at once and asked for millions of times.
  const around: PieceSurroundings = { ...room }
  return {
    pit,
    surroundings: (place: string | undefined, atMs: number): PieceSurroundings => {
      if (place === undefined) return room
      const curve = pit(place)
      const moment = curve.at(atMs)
      around.airC = moment.airC
      around.humidityRatio = moment.humidityRatio
      around.film = curve.film
      return around
    },
  }
}

/** The seed of a pit's chance. */
export function pitSeed(houseSeed: string, site: string, cooker: string): string {
  return `${houseSeed}/pit/${site}/${cooker}`
}
