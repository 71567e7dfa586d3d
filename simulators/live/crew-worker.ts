import { eventEndpoints } from '#shared/contract/event.ts'
import { pieceEndpoints } from '#shared/contract/piece.ts'
import { siteEndpoints } from '#shared/contract/site.ts'

import type { CrewAction } from '../crew.ts'
import { ApiProblem, type HouseApi } from './house-api.ts'

/**
 * Does through the API what the crew decided. What is refused is told, and not tried again: somebody was
 * faster, or saw it otherwise.
 */
export function createCrewWorker(options: {
  api: HouseApi
  onDone: (action: CrewAction) => void
  onRefused: (action: CrewAction, reason: string) => void
}) {
  const { api, onDone, onRefused } = options
  const settled = new Set<string>()
  return {
    /** @throws when the API cannot be reached */
    async work(actions: readonly CrewAction[]): Promise<void> {
      for (const action of actions) {
        const key = keyOf(action)
        if (settled.has(key)) continue
        try {
          await perform(api, action)
          onDone(action)
        } catch (error) {
          // A server in trouble may take it later; a refusal stands.
          if (!(error instanceof ApiProblem) || error.status >= 500 || error.status === 429) throw error
          onRefused(action, error.message)
        }
        settled.add(key)
      }
    },
  }
}

async function perform(api: HouseApi, action: CrewAction): Promise<void> {
  switch (action.kind) {
    case 'log-on-piece': {
      const { pieceId, event } = action
      await api.call(eventEndpoints.logOnPiece, { params: { pieceId }, body: event })
      return
    }
    case 'log-on-cooker': {
      const { cookerId, event } = action
      await api.call(eventEndpoints.logOnCooker, { params: { cookerId }, body: event })
      return
    }
    case 'place-probe': {
      const { pieceId, channelId, at } = action
      await api.call(pieceEndpoints.placeProbe, { params: { pieceId }, body: { channelId, at } })
      return
    }
    case 'start-piece': {
      const { site, start } = action
      await api.call(pieceEndpoints.start, { params: { site }, body: start })
      return
    }
    case 'add-service': {
      const { site, servesAt, portions, note } = action
      await api.call(siteEndpoints.addService, { params: { site }, body: { servesAt, portions, note } })
    }
  }
}

function keyOf(action: CrewAction): string {
  switch (action.kind) {
    case 'log-on-piece':
    case 'log-on-cooker':
      return action.event.id
    case 'place-probe':
      return `probe ${String(action.pieceId)} ${String(action.channelId)} ${action.at}`
    case 'start-piece':
      return action.start.eventId
    case 'add-service':
      return `service ${action.site} ${action.servesAt}`
  }
}
