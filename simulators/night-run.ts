import { seededRandom } from '#shared/domain/random.ts'

import { channelsOf, findSite, type DemoRecipe } from './demo/house.ts'
import { drawCrewHabits } from './crew-habits.ts'
import { createCrewHand, type CrewHand } from './crew-hand.ts'
import type { HouseModel, ModelPiece } from './house-model.ts'
import { crewNote, whoIsOn } from './demo/crew-words.ts'
import type { Logged, PieceFact, PieceIdentity } from './story.ts'

/** A piece as the crew means to cook it. */
export interface PlannedPiece {
  identity: PieceIdentity
  recipe: DemoRecipe
  cooker: string
  /** When the doors open for it. */
  servesMs: number
  /** Set for a piece that is moved to another cooker of its site an hour after its wrap. */
  movesTo?: string | undefined
}

/** A probe in a piece from when to when; open at the end while it is in. */
export interface ProbePlacement {
  device: string
  channel: number
  fromMs: number
  toMs: number | null
}

/** A piece as it was cooked so far. */
export interface CookedPiece {
  plan: PlannedPiece
  model: ModelPiece
  events: Logged<PieceFact>[]
  probes: ProbePlacement[]
  /** The core without any probe's faults, °C, one value a minute from the start on. */
  coreC: number[]
}

/**
 * Cooks planned pieces together, minute by minute, the crew deciding what people decide: spritz, wrap, move, push a
 * slipped probe in, pull, rest, hold, slice. Ends at `untilMs`, or once everything is sliced.
 */
export function runNight(options: { model: HouseModel; plans: readonly PlannedPiece[]; untilMs: number }) {
  const { model, plans, untilMs } = options
  const taken = new Map<string, CookedPiece>()
  const cooked = plans.map((plan): { piece: CookedPiece; hand: CrewHand } => {
    const piece: CookedPiece = {
      plan,
      model: model.addPiece(plan.identity),
      events: [],
      probes: [],
      coreC: [],
    }
    const { seed, onMs } = piece.model.curve
    return { piece, hand: createCrewHand({ plan, habits: drawCrewHabits(seed), seed, onMs }) }
  })
  const firstMs = Math.min(...cooked.map(({ piece }) => piece.model.curve.onMs))
  for (let atMs = firstMs; atMs <= untilMs; atMs += MINUTE_MS) {
    let open = false
    for (const { piece, hand } of cooked) {
      if (hand.done) continue
      open = true
      if (atMs < piece.model.curve.onMs) continue
      const { coreC } = piece.model.curve.at(atMs)
      piece.coreC.push(coreC)
      for (const fact of hand.decide(atMs, coreC, piece.model.curve.massKg())) log(piece, atMs, fact)
    }
    if (!open) break
  }
  return cooked.map(({ piece }) => piece)

  function log(piece: CookedPiece, atMs: number, fact: PieceFact) {
    piece.model.happened(atMs, fact)
    const random = seededRandom(piece.model.curve.seed, 'log', fact.kind, atMs)
    const delayMs = fact.kind === 'weighed' ? 0 : Math.floor(240 * random.uniform() ** 3) * 1000
    const note = crewNote(fact, random)
    piece.events.push({
      atMs,
      recordedMs: atMs + delayMs,
      fact,
      by: whoIsOn(findSite(piece.plan.identity.site), atMs, fact),
      ...(note === undefined ? {} : { note }),
    })
    if (fact.kind === 'on') placeProbe(piece, fact.cooker, atMs)
    if (fact.kind === 'moved') placeProbe(piece, fact.toCooker, atMs)
    if (fact.kind === 'hold' && fact.cooker !== undefined) placeProbe(piece, fact.cooker, atMs)
    if (fact.kind === 'sliced') takeProbeOut(piece, atMs)
  }

  /** Puts the first free probe of a cooker into a piece; with none free the piece goes without. */
  function placeProbe(piece: CookedPiece, cooker: string, atMs: number) {
    takeProbeOut(piece, atMs)
    const site = findSite(piece.plan.identity.site)
    const free = channelsOf(site, cooker, 'meat').find(({ device, channel }) => {
      return !taken.has(`${site.slug}/${device}/${String(channel)}`)
    })
    if (free === undefined) return
    taken.set(`${site.slug}/${free.device}/${String(free.channel)}`, piece)
    piece.probes.push({ ...free, fromMs: atMs, toMs: null })
  }

  function takeProbeOut(piece: CookedPiece, atMs: number) {
    const last = piece.probes.at(-1)
    if (last?.toMs === null) last.toMs = atMs
    for (const [key, holder] of taken) if (holder === piece) taken.delete(key)
  }
}

const MINUTE_MS = 60_000
