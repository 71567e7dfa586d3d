import type { LaneMark, LaneMarkKind } from '@/components/chart/lane-data.ts'
import type { CookEvent, EventKind } from '@/shared/contract/event.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import { moment } from './lane-piece.ts'

const kinds: Partial<Record<EventKind, LaneMarkKind>> = {
  wrap: 'wrap',
  pull: 'pull',
  spritz: 'spritz',
  fire_tended: 'fire',
  moved: 'moved',
  probe_reseated: 'reseated',
  note: 'note',
  weighed: 'weighed',
}

/** Events as marks on a lane; what was corrected or taken back is not drawn. */
export function eventMarks(events: Iterable<CookEvent>): LaneMark[] {
  const marks: LaneMark[] = []
  for (const event of events) {
    const kind = kinds[event.fact.kind]
    if (kind === undefined || event.correctedById !== null) continue
    if (kind !== 'fire' && event.pieceId === null) continue
    marks.push({ kind, at: Date.parse(event.happenedAt), pieceId: kind === 'fire' ? null : event.pieceId })
  }
  return marks
}

/** The wrap and the pull of a piece as it stands, for where its events are not known. */
export function pieceMarks(piece: Piece): LaneMark[] {
  const mark = (kind: 'wrap' | 'pull', at: number | null): LaneMark[] =>
    at === null ? [] : [{ kind, at, pieceId: piece.id }]
  return [...mark('wrap', moment(piece.wrappedAt)), ...mark('pull', moment(piece.pulledAt))]
}
