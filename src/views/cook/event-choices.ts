import type { EventFact } from '@/shared/contract/event.ts'
import type { Piece, PieceStage } from '@/shared/contract/piece.ts'
import { wrapMethods } from '@/shared/domain/cooking.ts'

/** What has to be asked before it can be logged. */
export type AskedKind = 'moved' | 'note' | 'weighed'

/** Something that can be logged on a piece: with one tap, or after a question. */
export type EventChoice = { key: string; fact: EventFact } | { key: string; ask: AskedKind }

export interface EventChoices {
  /** What comes next in the usual course, the likeliest first. */
  next: EventChoice[]
  /** What may happen at any time. */
  more: EventChoice[]
}

const wraps = wrapMethods.filter((method) => method !== 'none')
const onTheFire: readonly PieceStage[] = ['cooking', 'wrapped']

/**
 * What the crew may want to log where the piece stands in its night. It leaves out what would contradict the log
 * (a wrap after the pull), not what is unusual.
 */
export function eventChoices(
  piece: Pick<Piece, 'stage' | 'wrapMethod'>,
  holdingCookers: readonly { id: number; name: string }[],
): EventChoices {
  const one = (fact: EventFact, key: string = fact.kind): EventChoice => ({ key, fact })
  const planned = [...wraps].sort((a, b) => Number(b === piece.wrapMethod) - Number(a === piece.wrapMethod))
  const wrap = planned.map((method) => one({ kind: 'wrap', method }, `wrap-${method}`))
  const pull = [
    one({ kind: 'pull', by: 'temperature' }, 'pull-temperature'),
    one({ kind: 'pull', by: 'feel' }, 'pull-feel'),
  ]
  const rest = one({ kind: 'rest' })
  const hold =
    holdingCookers.length === 0
      ? [one({ kind: 'hold' })]
      : holdingCookers.map(({ id }) => one({ kind: 'hold', cookerId: id }, `hold-${id}`))
  const sliced = one({ kind: 'sliced' })
  const spritz = one({ kind: 'spritz' })
  const asked = (['note', 'weighed'] as const).map((ask): EventChoice => ({ key: ask, ask }))
  const fire = onTheFire.includes(piece.stage)
    ? [one({ kind: 'fire_tended' }), one({ kind: 'probe_reseated' }), { key: 'moved', ask: 'moved' as const }]
    : []

  switch (piece.stage) {
    case 'waiting':
    case 'done':
      return { next: [], more: asked }
    case 'cooking':
      return { next: [...wrap, spritz, ...pull], more: [...fire, ...asked] }
    case 'wrapped':
      return { next: [...pull, ...wrap], more: [...fire, spritz, ...asked] }
    case 'pulled':
      return { next: [rest, ...hold, sliced], more: asked }
    case 'resting':
      return { next: [...hold, sliced], more: asked }
    case 'holding':
      return { next: [sliced], more: [{ key: 'moved', ask: 'moved' }, ...asked] }
  }
}
