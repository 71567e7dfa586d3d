import type { CookEvent } from '#shared/contract/event.ts'
import type { Piece } from '#shared/contract/piece.ts'
import type { Tonight } from '#shared/contract/site.ts'
import { effectiveEvents } from '#shared/domain/effective-events.ts'

import { probeSeed } from '../channel-series.ts'
import { demoSites, findRecipe } from '../demo/house.ts'
import { createHouseModel, type HouseModel, type ModelPiece } from '../house-model.ts'
import { createProbe, drawSlip, type Probe, type Slip } from '../probe.ts'
import type { PieceFact } from '../story.ts'
import type { SiteState } from './house-state.ts'

/** A change of a pit's set that was noticed, ms since 1970 UTC and °C. */
export interface SetChange {
  site: string
  cooker: string
  atMs: number
  setC: number
}

/** One value of one channel of a device. */
export interface ChannelValue {
  channel: number
  valueC: number
}

/** The physical house as far as the API knows it. */
export interface LiveHouse {
  /** What a device would report of a moment; channels without a probe in anything, or silent, are left out. */
  deviceValues(site: string, device: string, atMs: number): ChannelValue[]
  /** The piece in the model; undefined when it has not gone on, or so long ago that nobody cooks it any more. */
  piece(pieceId: number): LivePiece | undefined
}

export interface LivePiece {
  model: ModelPiece
  slip: Slip | undefined
  /** The moment at which the core was first seen at a temperature, up to `untilMs`; whole minutes from its start. */
  whenReached(targetC: number, untilMs: number): number | undefined
}

/**
 * Builds the house from what the API says, from nothing else: pieces from their labels, weights, starts and events.
 * Pits begin with what they were set to when first seen, and follow the changes noticed since.
 */
export function createLiveHouse(options: {
  houseSeed: string
  states: readonly SiteState[]
  /** What each cooker was set to when first seen, by `site/cooker`. */
  firstSetC: ReadonlyMap<string, number>
  setChanges: readonly SetChange[]
  nowMs: number
}): LiveHouse {
  const { houseSeed, states, firstSetC, setChanges, nowMs } = options
  const model = createHouseModel({
    houseSeed,
    sites: states.map((state) => modelSite(state.tonight, firstSetC)),
  })
  for (const { site, cooker, atMs, setC } of setChanges) model.pitSet(site, cooker, atMs, setC)
  const pieces = new Map<number, LivePiece>()
  for (const { tonight, events } of states) {
    for (const piece of tonight.pieces) {
      const live = livePiece(model, tonight, piece, events.get(piece.id) ?? [], nowMs)
      if (live !== undefined) pieces.set(piece.id, live)
    }
  }
  const probes = new Map<string, Probe>()
  return {
    piece: (pieceId) => pieces.get(pieceId),
    deviceValues(site, deviceSlug, atMs) {
      const tonight = states.find((state) => state.tonight.site.slug === site)?.tonight
      const device = tonight?.devices.find(({ slug }) => slug === deviceSlug)
      if (tonight === undefined || device === undefined) return []
      return device.channels.flatMap(({ number, placedIn }) => {
        const valueC = channelValue(tonight, deviceSlug, number, placedIn, atMs)
        return valueC === undefined ? [] : [{ channel: number, valueC }]
      })
    },
  }

  function channelValue(
    tonight: Tonight,
    device: string,
    channel: number,
    placedIn: Tonight['devices'][number]['channels'][number]['placedIn'],
    atMs: number,
  ): number | undefined {
    const site = tonight.site.slug
    if (placedIn?.kind === 'cooker') {
      const cooker = tonight.cookers.find(({ id }) => id === placedIn.id)
      if (cooker === undefined) return undefined
      const { probeC } = model.pit(site, cooker.name).at(atMs)
      return probeOf(site, device, channel, 'pit').reading(atMs, probeC, probeC)
    }
    const piece = placedIn === null ? undefined : pieces.get(placedIn.id)
    if (piece === undefined || atMs < piece.model.curve.onMs) return undefined
    const { coreC, airC } = piece.model.curve.at(atMs)
    return probeOf(site, device, channel, 'meat', piece.slip).reading(atMs, coreC, airC)
  }

  function probeOf(site: string, device: string, channel: number, role: 'pit' | 'meat', slip?: Slip): Probe {
    const seed = probeSeed(houseSeed, site, device, channel)
    const key = `${seed} ${role} ${String(slip?.fromMs)} ${String(slip?.toMs)}`
    const known = probes.get(key)
    if (known !== undefined) return known
    const made = createProbe({ seed, role, slip })
    probes.set(key, made)
    return made
  }
}

/** A piece on for longer than this is nobody's any more: it is left out until somebody clears it away. */
export const FORGOTTEN_MS = 48 * 3_600_000

function livePiece(
  model: HouseModel,
  tonight: Tonight,
  piece: Piece,
  logged: readonly CookEvent[],
  nowMs: number,
): LivePiece | undefined {
  const happened = effectiveEvents(
    logged.map((event) => ({
      ...event,
      happenedAt: Date.parse(event.happenedAt),
      recordedAt: Date.parse(event.recordedAt),
    })),
  )
  const on = happened.find(({ fact }) => fact.kind === 'on')
  if (on === undefined || nowMs - on.happenedAt > FORGOTTEN_MS) return undefined
  const { label, cured, rawKg } = piece
  const cut = findRecipe(piece.recipe.slug)?.cut ?? 'packer'
  const added = model.addPiece({ site: tonight.site.slug, label, cured, cut, rawKg, onMs: on.happenedAt })
  for (const { fact, happenedAt } of happened) {
    const meant = pieceFact(tonight, fact)
    if (meant !== undefined) added.happened(happenedAt, meant)
  }
  const { curve } = added
  const reseated = happened.find(({ fact }) => fact.kind === 'probe_reseated')
  const slip = drawSlip(curve.seed, curve.onMs)
  return {
    model: added,
    slip: slip && reseated ? { ...slip, toMs: Math.min(slip.toMs, reseated.happenedAt) } : slip,
    whenReached(targetC, untilMs) {
      for (let atMs = curve.onMs; atMs <= untilMs; atMs += 60_000) {
        if (curve.at(atMs).coreC >= targetC) return atMs
      }
      return undefined
    },
  }
}

/** An event's fact with cookers by name; undefined for what the meat does not notice. */
function pieceFact(tonight: Tonight, fact: CookEvent['fact']): PieceFact | undefined {
  const named = (id: number) => tonight.cookers.find((cooker) => cooker.id === id)?.name
  switch (fact.kind) {
    case 'on': {
      const cooker = named(fact.cookerId)
      return cooker === undefined ? undefined : { kind: 'on', cooker }
    }
    case 'moved': {
      const toCooker = named(fact.toCookerId)
      return toCooker === undefined ? undefined : { kind: 'moved', toCooker }
    }
    case 'hold': {
      // Held, and nobody said where: in the site's holding place, if it has one.
      const cooker =
        fact.cookerId === undefined
          ? tonight.cookers.find(({ kind }) => kind === 'holding')?.name
          : named(fact.cookerId)
      return { kind: 'hold', cooker }
    }
    case 'wrap':
    case 'spritz':
    case 'probe_reseated':
    case 'pull':
    case 'rest':
    case 'sliced':
      return fact
    default:
      return undefined
  }
}

function modelSite(tonight: Tonight, firstSetC: ReadonlyMap<string, number>) {
  const { slug, elevationM } = tonight.site
  return {
    slug,
    elevationM,
    longitudeDeg: demoSites.find((site) => site.slug === slug)?.longitudeDeg ?? -90,
    cookers: tonight.cookers.map(({ name, kind, pitSetC }) => {
      return { name, kind, pitSetC: firstSetC.get(`${slug}/${name}`) ?? pitSetC }
    }),
  }
}
