import { useQueryClient } from '@tanstack/vue-query'
import { shallowRef, type ShallowRef } from 'vue'
import { newId } from '@/api/chance.ts'
import { call } from '@/api/client.ts'
import { useProblemWords } from '@/composables/useProblemWords.ts'
import { eventEndpoints, type CookEvent, type EventFact, type NewEvent } from '@/shared/contract/event.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { LiveSite } from '@/stores/live-types.ts'

export interface EventLog {
  /** What was just logged and can be taken back with one tap; null when nothing was, or it was put away. */
  readonly last: Readonly<ShallowRef<CookEvent | null>>
  /** What could not be sent and why, kept so that it can be sent again as it was. */
  readonly unsent: Readonly<ShallowRef<{ event: NewEvent; why: string } | null>>
  readonly busy: Readonly<ShallowRef<boolean>>
  /** Logs at once. Gives back whether it was stored. */
  log(fact: EventFact, more?: { at?: number; note?: string; corrects?: CookEvent }): Promise<boolean>
  takeBack(event: CookEvent): Promise<boolean>
  again(): Promise<boolean>
  dismiss(): void
}

/**
 * Logging without questions: what is tapped is logged, and can be taken back. An event keeps its id when it has to
 * be sent again, so it is stored once however often it is sent.
 */
export function useEventLog(piece: () => Piece | undefined, live: LiveSite): EventLog {
  const problemWords = useProblemWords()
  const queries = useQueryClient()
  const last = shallowRef<CookEvent | null>(null)
  const unsent = shallowRef<{ event: NewEvent; why: string } | null>(null)
  const busy = shallowRef(false)

  async function send(event: NewEvent, corrected?: CookEvent): Promise<boolean> {
    const current = piece()
    if (current === undefined || busy.value) return false
    busy.value = true
    unsent.value = null
    try {
      const stored = await post(event, current, corrected)
      const replaced = corrected === undefined ? [] : [{ ...corrected, correctedById: stored.id }]
      live.take({ events: [...replaced, stored] })
      last.value = event.fact.kind === 'withdrawn' ? null : stored
      // The piece's stage follows from its events; its frame usually comes first, this covers a lost line.
      void queries.invalidateQueries({ queryKey: ['piece', current.id] })
      return true
    } catch (error) {
      unsent.value = { event, why: problemWords(error) }
      return false
    } finally {
      busy.value = false
    }
  }

  function log(
    fact: EventFact,
    { at, note, corrects }: { at?: number; note?: string; corrects?: CookEvent } = {},
  ): Promise<boolean> {
    const event: NewEvent = {
      id: newId(),
      happenedAt: new Date(at ?? live.now.value).toISOString(),
      fact,
      ...(note === undefined || note === '' ? {} : { note }),
      ...(corrects === undefined ? {} : { correctsId: corrects.id }),
    }
    return send(event, corrects)
  }

  return {
    last,
    unsent,
    busy,
    log,
    takeBack: (event) => log({ kind: 'withdrawn' }, { corrects: event }),
    again: () => (unsent.value === null ? Promise.resolve(false) : send(unsent.value.event)),
    dismiss: () => {
      last.value = null
      unsent.value = null
    },
  }
}

/** An event goes to the log of its subject: the fire to the cooker's, all else to the piece's. */
function post(event: NewEvent, piece: Piece, corrected: CookEvent | undefined): Promise<CookEvent> {
  const ofCooker =
    event.fact.kind === 'fire_tended' || (corrected !== undefined && corrected.pieceId === null)
  const cookerId = corrected?.cookerId ?? piece.cookerId
  if (ofCooker && cookerId !== null) {
    return call(eventEndpoints.logOnCooker, { params: { cookerId }, body: event })
  }
  return call(eventEndpoints.logOnPiece, { params: { pieceId: piece.id }, body: event })
}
