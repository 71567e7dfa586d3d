import type { ChannelSeries } from '../channel-series.ts'
import type { CookedPiece, ProbePlacement } from '../night-run.ts'
import type { CookerFact, Logged, PieceFact } from '../story.ts'

/** A piece of the demo house with all that was written down of it. Weights in kg, times in ms since 1970 UTC. */
export interface DemoPiece {
  site: string
  label: string
  /** A recipe's slug. */
  recipe: string
  cured: boolean
  rawKg: number
  trimmedKg: number | null
  cookedKg: number | null
  slicedKg: number | null
  onMs: number
  /** The service it is for. */
  servesMs: number
  /** In time order; the first is `on`. Where it stood follows from them. */
  events: Logged<PieceFact>[]
  /** Which channel was in it when; open at the end while it is in. */
  probes: ProbePlacement[]
}

/** An event logged on a cooker. */
export interface DemoCookerEvent extends Logged<CookerFact> {
  site: string
  cooker: string
}

export interface DemoService {
  site: string
  servesMs: number
  portions: number
}

/** Some nights of the demo house. */
export interface DemoNights {
  services: DemoService[]
  pieces: DemoPiece[]
  cookerEvents: DemoCookerEvent[]
  /** One entry for each channel, in time order, no moment twice. */
  series: ChannelSeries[]
}

/** A cooked piece in the form in which it is handed on. */
export function toDemoPiece(cooked: CookedPiece): DemoPiece {
  const { identity, recipe, servesMs } = cooked.plan
  const weighed = (stage: 'trimmed' | 'cooked' | 'sliced') => {
    for (const { fact } of cooked.events) if (fact.kind === 'weighed' && fact.stage === stage) return fact.kg
    return null
  }
  return {
    site: identity.site,
    label: identity.label,
    recipe: recipe.slug,
    cured: identity.cured,
    rawKg: identity.rawKg,
    trimmedKg: weighed('trimmed'),
    cookedKg: weighed('cooked'),
    slicedKg: weighed('sliced'),
    onMs: cooked.model.curve.onMs,
    servesMs,
    events: cooked.events,
    probes: cooked.probes,
  }
}

/** Joins series of the same channel into one, in time order. */
export function joinSeries(parts: readonly ChannelSeries[]): ChannelSeries[] {
  const byChannel = new Map<string, ChannelSeries[]>()
  for (const part of parts) {
    const key = `${part.site}/${part.device}/${String(part.channel)}`
    byChannel.set(key, [...(byChannel.get(key) ?? []), part])
  }
  return [...byChannel.values()].flatMap((ofChannel) => {
    const [first] = ofChannel
    if (first === undefined) return []
    const values = new Map<number, number>()
    for (const part of ofChannel)
      part.atMs.forEach((atMs, index) => values.set(atMs, part.valueC[index] ?? NaN))
    const atMs = [...values.keys()].sort((a, b) => a - b)
    return [{ ...first, atMs, valueC: atMs.map((moment) => values.get(moment) ?? NaN) }]
  })
}

/** Portions that pieces of this raw weight come to: common practice is half of it sliced, 170 g each. */
export function portionsOf(pieces: readonly { rawKg: number }[]): number {
  const rawKg = pieces.reduce((sum, piece) => sum + piece.rawKg, 0)
  return Math.floor((rawKg * 0.5) / 0.17 / 5) * 5
}
