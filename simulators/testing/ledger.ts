import type { CookEvent } from '#shared/contract/event.ts'
import type { Piece } from '#shared/contract/piece.ts'
import type { Device } from '#shared/contract/device.ts'
import type { Service } from '#shared/contract/site.ts'
import { projectPiece } from '#shared/domain/piece-projection.ts'

import type { CrewAction } from '../crew.ts'
import type { DemoTonight } from '../demo/tonight.ts'
import { demoRecipes, demoSites, findRecipe, findSite } from '../demo/house.ts'
import type { SiteState } from '../live/house-state.ts'
import type { PieceFact } from '../story.ts'

/** A site's night kept on paper: what the crew does goes in, what the API would say of it comes out. */
export interface Ledger {
  state(nowMs: number): SiteState
  enter(action: CrewAction, nowMs: number): void
  /** Every event so far, sliced pieces included. */
  readonly events: readonly CookEvent[]
  readonly services: readonly Service[]
}

interface Entry {
  id: number
  label: string
  recipe: string
  rawKg: number
  serviceId: number | null
  channelId: number | null
  events: CookEvent[]
}

const instant = (ms: number) => new Date(ms).toISOString()
const person = { id: 1, name: 'Odell Sayer' }

/** Opens the ledger of one site of the demo house with tonight's pieces in it. */
export function openLedger(night: DemoTonight, slug: string): Ledger {
  const site = findSite(slug)
  const cookers = site.cookers.map((cooker, index) => ({ ...cooker, id: index + 1, version: 1, site: slug }))
  const cookerId = (name: string | undefined) => cookers.find((cooker) => cooker.name === name)?.id ?? 0
  const recipes = demoRecipes.map((recipe, index) => ({ ...recipe, id: index + 1 }))
  // Numbers are the whole house's: no two sites have a piece of the same one.
  const firstId = 1000 * demoSites.indexOf(site) + 1
  let nextChannel = 0
  const channels = site.devices.flatMap((device) =>
    device.channels.map((channel) => ({ ...channel, id: (nextChannel += 1), device: device.slug })),
  )
  const services: Service[] = []
  const entries: Entry[] = []
  const onCookers: CookEvent[] = []
  const addService = (servesMs: number, portions: number, note: string | null) => {
    const date = instant(servesMs).slice(0, 10)
    services.push({ id: services.length + 1, site: slug, date, servesAt: instant(servesMs), portions, note })
  }
  const event = (
    id: string,
    fact: CookEvent['fact'],
    atMs: number,
    subject: Partial<CookEvent>,
  ): CookEvent => ({
    ...{ id, fact, happenedAt: instant(atMs), recordedAt: instant(atMs), by: person, note: null },
    ...{ correctsId: null, correctedById: null, pieceId: null, cookerId: null, ...subject },
  })
  for (const { site: at, servesMs, portions } of night.services)
    if (at === slug) addService(servesMs, portions, null)
  for (const piece of night.pieces.filter((each) => each.site === slug)) {
    const id = firstId + entries.length
    const probe = piece.probes.find(({ toMs }) => toMs === null)
    entries.push({
      ...{ id, label: piece.label, recipe: piece.recipe, rawKg: piece.rawKg, serviceId: 1 },
      channelId: channels.find((channel) => isChannel(channel, probe))?.id ?? null,
      events: piece.events.map(({ fact, atMs }, turn) => {
        return event(`${String(id)}-${String(turn)}`, withIds(fact, cookerId), atMs, { pieceId: id })
      }),
    })
  }

  const asPiece = (entry: Entry): Piece => {
    const recipe = findRecipe(entry.recipe)
    const known = recipes.find(({ slug: each }) => each === entry.recipe)
    if (recipe === undefined || known === undefined) throw new Error(`no recipe ${entry.recipe}`)
    const projection = projectPiece(
      entry.events.map((each) => ({
        ...each,
        happenedAt: Date.parse(each.happenedAt),
        recordedAt: Date.parse(each.recordedAt),
      })),
    )
    const moment = (ms: number | null) => (ms === null ? null : instant(ms))
    return {
      ...{ id: entry.id, version: entry.events.length, site: slug, label: entry.label, rawKg: entry.rawKg },
      ...{ parentId: null, followsId: null, serviceId: entry.serviceId, cured: recipe.cured },
      recipe: { id: known.id, slug: known.slug, name: known.name },
      ...{ trimmedKg: projection.trimmedKg, cookedKg: projection.cookedKg, slicedKg: projection.slicedKg },
      ...{ wrapAtC: recipe.wrapAtC, wrapMethod: recipe.wrapMethod, pullAtC: recipe.pullAtC },
      ...{
        stage: projection.stage,
        cookerId: projection.placements.at(-1)?.cookerId ?? null,
        cookedOnId:
          projection.placements.findLast(({ from }) => from < (projection.pulledAt ?? Infinity))?.cookerId ??
          null,
        position: null,
      },
      channelId: projection.stage === 'done' ? null : entry.channelId,
      ...{ onAt: moment(projection.onAt), wrappedAt: moment(projection.wrappedAt) },
      ...{ wrappedWith: projection.wrappedWith, pulledAt: moment(projection.pulledAt) },
      ...{ restAt: moment(projection.restAt), holdAt: moment(projection.holdAt) },
      doneAt: moment(projection.doneAt),
    }
  }

  const asDevices = (pieces: readonly Piece[]): Device[] =>
    site.devices.map((device, index) => ({
      ...{ id: index + 1, site: slug, slug: device.slug, name: device.name, intervalS: device.intervalS },
      ...{ connection: 'online', lastSeenAt: null, batteryPercent: null, signalDbm: null },
      channels: channels
        .filter((channel) => channel.device === device.slug)
        .map(({ id, number, role, cooker }) => {
          const piece = pieces.find(({ channelId }) => channelId === id)
          const inPiece =
            piece === undefined ? null : { kind: 'piece' as const, id: piece.id, name: piece.label }
          const inPit = { kind: 'cooker' as const, id: cookerId(cooker), name: cooker }
          return { id, number, unit: 'Cel', placedIn: role === 'pit' ? inPit : inPiece }
        }),
    }))

  return {
    services,
    get events() {
      return [...entries.flatMap((entry) => entry.events), ...onCookers]
    },
    state(nowMs) {
      const pieces = entries.map(asPiece).filter(({ stage }) => stage !== 'done')
      const { name, timeZone, elevationM } = site
      return {
        recipes,
        events: new Map(entries.map((entry) => [entry.id, entry.events])),
        tonight: {
          site: { id: 1, slug, name, timeZone, elevationM },
          now: instant(nowMs),
          services: services.filter(({ servesAt }) => Date.parse(servesAt) > nowMs - 6 * 3_600_000),
          cookers: cookers.map((cooker) => {
            const pit = channels.find((channel) => channel.cooker === cooker.name && channel.role === 'pit')
            return { ...cooker, pitChannelId: pit?.id ?? null }
          }),
          pieces,
          devices: asDevices(pieces),
          latest: [],
          forecasts: [],
        },
      }
    },
    enter(action, nowMs) {
      switch (action.kind) {
        case 'add-service':
          addService(Date.parse(action.servesAt), action.portions, action.note)
          return
        case 'start-piece': {
          const { start } = action
          const id = firstId + entries.length
          const on = { kind: 'on' as const, cookerId: start.cookerId }
          entries.push({
            ...{ id, label: start.label, rawKg: start.rawKg, serviceId: start.serviceId ?? null },
            ...{ channelId: start.channelId ?? null, recipe: recipeSlug(start.recipeId) },
            events: [event(start.eventId, on, Date.parse(start.onAt), { pieceId: id })],
          })
          return
        }
        case 'place-probe':
          entryOf(action.pieceId).channelId = action.channelId
          return
        case 'log-on-piece': {
          const { id, fact, happenedAt } = action.event
          const { events } = entryOf(action.pieceId)
          if (events.some((each) => each.id === id)) return
          events.push({
            ...event(id, fact, Date.parse(happenedAt), { pieceId: action.pieceId }),
            recordedAt: instant(nowMs),
          })
          return
        }
        case 'log-on-cooker': {
          const { id, fact, happenedAt } = action.event
          if (onCookers.some((each) => each.id === id)) return
          onCookers.push(event(id, fact, Date.parse(happenedAt), { cookerId: action.cookerId }))
        }
      }
    },
  }

  function entryOf(pieceId: number): Entry {
    const entry = entries.find(({ id }) => id === pieceId)
    if (entry === undefined) throw new Error(`no piece ${String(pieceId)}`)
    return entry
  }

  function recipeSlug(recipeId: number): string {
    return recipes.find(({ id }) => id === recipeId)?.slug ?? ''
  }
}

function isChannel(
  channel: { device: string; number: number },
  probe: { device: string; channel: number } | undefined,
): boolean {
  return channel.device === probe?.device && channel.number === probe.channel
}

function withIds(fact: PieceFact, cookerId: (name: string | undefined) => number): CookEvent['fact'] {
  switch (fact.kind) {
    case 'on':
      return { kind: 'on', cookerId: cookerId(fact.cooker) }
    case 'moved':
      return { kind: 'moved', toCookerId: cookerId(fact.toCooker) }
    case 'hold':
      return { kind: 'hold', cookerId: cookerId(fact.cooker) }
    default:
      return fact
  }
}
