import { eventEndpoints, type CookEvent } from '#shared/contract/event.ts'
import { pieceEndpoints } from '#shared/contract/piece.ts'
import { siteEndpoints } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'

import type { HouseApi } from './house-api.ts'
import { fingerprint, type SiteState } from './house-state.ts'
import { createLiveHouse, type LiveHouse, type SetChange } from './live-house.ts'

/** Knows the running night from the API, and the physical house that follows from it. */
export interface NightWatch {
  /** Asks the API again. @throws when it cannot be reached; what was known stays known. */
  look(): Promise<void>
  /** The house as last known; undefined before the first successful look. */
  house(): LiveHouse | undefined
  states(): readonly SiteState[]
}

export function createNightWatch(options: {
  api: HouseApi
  sites: readonly string[]
  houseSeed: string
  clock: Clock
}): NightWatch {
  const { api, sites, houseSeed, clock } = options
  const logs = new Map<number, { version: number; events: CookEvent[] }>()
  const firstSetC = new Map<string, number>()
  const lastSetC = new Map<string, number>()
  const setChanges: SetChange[] = []
  let states: SiteState[] = []
  let house: LiveHouse | undefined
  let built = ''

  return {
    async look() {
      const seen: SiteState[] = []
      for (const site of sites) seen.push(await lookAt(site))
      noticeSets(seen)
      states = seen
      const print = `${fingerprint(seen)} ${String(setChanges.length)}`
      if (house !== undefined && print === built) return
      house = createLiveHouse({ houseSeed, states, firstSetC, setChanges, nowMs: clock.now() })
      built = print
    },
    house: () => house,
    states: () => states,
  }

  async function lookAt(site: string): Promise<SiteState> {
    const tonight = await api.call(siteEndpoints.tonight, { params: { site } })
    const { items: recipes } = await api.call(pieceEndpoints.recipes, { params: { site } })
    const events = new Map<number, readonly CookEvent[]>()
    for (const piece of tonight.pieces) {
      const known = logs.get(piece.id)
      if (known?.version === piece.version) {
        events.set(piece.id, known.events)
        continue
      }
      const { items } = await api.call(eventEndpoints.ofPiece, { params: { pieceId: piece.id } })
      logs.set(piece.id, { version: piece.version, events: items })
      events.set(piece.id, items)
    }
    for (const id of logs.keys()) {
      const open = [...states.flatMap((state) => state.tonight.pieces), ...tonight.pieces]
      if (!open.some((piece) => piece.id === id)) logs.delete(id)
    }
    return { tonight, events, recipes }
  }

  /** A set that is other than at the last look was changed since: from now on the fire follows it. */
  function noticeSets(seen: readonly SiteState[]) {
    for (const { tonight } of seen) {
      for (const { name, pitSetC } of tonight.cookers) {
        const key = `${tonight.site.slug}/${name}`
        const before = lastSetC.get(key)
        lastSetC.set(key, pitSetC)
        if (before === undefined) firstSetC.set(key, pitSetC)
        else if (before !== pitSetC) {
          setChanges.push({ site: tonight.site.slug, cooker: name, atMs: clock.now(), setC: pitSetC })
        }
      }
    }
  }
}
