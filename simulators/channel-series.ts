import { fuelFedAt } from './physics/fuel-dip.ts'
import { pitKinds } from './physics/pit-kinds.ts'
import { channelsOf, type DemoSite } from './demo/house.ts'
import { whoIsOn } from './demo/crew-words.ts'
import { pitSeed, type HouseModel } from './house-model.ts'
import type { CookedPiece } from './night-run.ts'
import { createProbe, drawSlip, type Slip } from './probe.ts'
import type { CookerFact, Logged } from './story.ts'

/** One channel's readings in time order, ms since 1970 UTC and °C, as the probe shows them. */
export interface ChannelSeries {
  site: string
  device: string
  channel: number
  atMs: number[]
  valueC: number[]
}

/** A piece's readings, one series for each probe that was in it; silences left out. */
export function meatSeries(options: {
  houseSeed: string
  piece: CookedPiece
  everyS: number
  untilMs: number
}): ChannelSeries[] {
  const { houseSeed, piece, everyS, untilMs } = options
  const { site } = piece.plan.identity
  const slip = slipOf(piece)
  return piece.probes.map(({ device, channel, fromMs, toMs }) => {
    const probe = createProbe({ seed: probeSeed(houseSeed, site, device, channel), role: 'meat', slip })
    const moments = momentsBetween(fromMs, Math.min(untilMs + 1, toMs ?? Infinity), everyS)
    return collect({ site, device, channel }, moments, (atMs) => {
      const { coreC, airC } = piece.model.curve.at(atMs)
      return probe.reading(atMs, coreC, airC)
    })
  })
}

/** The readings of a cooker's pit probes over a span; silences left out. */
export function pitSeries(options: {
  model: HouseModel
  site: DemoSite
  cooker: string
  fromMs: number
  untilMs: number
  everyS: number
}): ChannelSeries[] {
  const { model, site, cooker, fromMs, untilMs, everyS } = options
  const curve = model.pit(site.slug, cooker)
  return channelsOf(site, cooker, 'pit').map(({ device, channel }) => {
    const probe = createProbe({ seed: probeSeed(model.houseSeed, site.slug, device, channel), role: 'pit' })
    return collect(
      { site: site.slug, device, channel },
      momentsBetween(fromMs, untilMs + 1, everyS),
      (atMs) => {
        const { probeC } = curve.at(atMs)
        return probe.reading(atMs, probeC, probeC)
      },
    )
  })
}

/** What was logged on a fire: it was fed each time its fuel had run low. */
export function fireEvents(
  houseSeed: string,
  site: DemoSite,
  cookerName: string,
  fromMs: number,
  untilMs: number,
): Logged<CookerFact>[] {
  const kind = site.cookers.find(({ name }) => name === cookerName)?.kind
  if (kind === undefined) return []
  const fact = { kind: 'fire_tended' as const }
  return fuelFedAt(pitSeed(houseSeed, site.slug, cookerName), pitKinds[kind], fromMs, untilMs).map((atMs) => {
    return { atMs, recordedMs: atMs, fact, by: whoIsOn(site, atMs, fact) }
  })
}

/** The seed of a channel's probe. */
export function probeSeed(houseSeed: string, site: string, device: string, channel: number): string {
  return `${houseSeed}/probe/${site}/${device}/${String(channel)}`
}

/** A piece's slip, ended early where somebody pushed the probe in again. */
function slipOf(piece: CookedPiece): Slip | undefined {
  const slip = drawSlip(piece.model.curve.seed, piece.model.curve.onMs)
  const reseated = piece.events.find(({ fact }) => fact.kind === 'probe_reseated')
  return slip && reseated ? { ...slip, toMs: Math.min(slip.toMs, reseated.atMs) } : slip
}

/** Whole multiples of the interval from `fromMs` on, before `endMs`. */
function* momentsBetween(fromMs: number, endMs: number, everyS: number): Generator<number> {
  const everyMs = everyS * 1000
  for (let atMs = Math.ceil(fromMs / everyMs) * everyMs; atMs < endMs; atMs += everyMs) yield atMs
}

function collect(
  of: Pick<ChannelSeries, 'site' | 'device' | 'channel'>,
  moments: Iterable<number>,
  read: (atMs: number) => number | undefined,
): ChannelSeries {
  const series: ChannelSeries = { ...of, atMs: [], valueC: [] }
  for (const atMs of moments) {
    const valueC = read(atMs)
    if (valueC === undefined) continue
    series.atMs.push(atMs)
    series.valueC.push(valueC)
  }
  return series
}
