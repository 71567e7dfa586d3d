import type { LiveChanges, ServerMessage } from '#shared/contract/live.ts'
import type { Tonight } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { nextStep } from '#shared/domain/next-step.ts'

type Piece = Tonight['pieces'][number]
type Forecast = Tonight['forecasts'][number]

/** What the titles of a room's pages say, followed from snapshots and changes. */
export interface RoomTitle {
  /** A snapshot is about to be read: what changes meanwhile may not be in it. */
  beginRead(): void
  know(tonight: Pick<Tonight, 'pieces' | 'forecasts'>): void
  note(changes: LiveChanges): void
  /** The message; undefined while it says what it said the last time. */
  ifNew(): string | undefined
  text(): string
}

/** `clock`: real time, by which it is decided what is due. */
export function createTitle(site: string, clock: Clock): RoomTitle {
  let pieces = new Map<number, Piece>()
  let forecasts = new Map<number, Forecast>()
  /** Null while no snapshot is being read. */
  let meanwhile: LiveChanges[] | null = null
  let outdated = false
  let last = text()

  function put({ pieces: newPieces = [], forecasts: newForecasts = [] }: LiveChanges): void {
    if (newPieces.length === 0 && newForecasts.length === 0) return
    outdated = true
    for (const piece of newPieces) pieces.set(piece.id, piece)
    for (const forecast of newForecasts) forecasts.set(forecast.pieceId, forecast)
  }

  function text(): string {
    const next = nextStep(pieces.values(), forecasts, clock.now())
    return JSON.stringify({ type: 'title', site, next } satisfies ServerMessage)
  }

  return {
    beginRead: () => {
      meanwhile = []
    },
    know: (tonight) => {
      pieces = new Map(tonight.pieces.map((piece) => [piece.id, piece]))
      forecasts = new Map(tonight.forecasts.map((forecast) => [forecast.pieceId, forecast]))
      outdated = true
      for (const changes of meanwhile ?? []) put(changes)
      meanwhile = null
    },
    note: (changes) => {
      if (changes.pieces ?? changes.forecasts) meanwhile?.push(changes)
      put(changes)
    },
    ifNew: () => {
      if (!outdated) return undefined
      outdated = false
      const now = text()
      if (now === last) return undefined
      last = now
      return now
    },
    text,
  }
}
