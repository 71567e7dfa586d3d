import type { Piece } from '@/shared/contract/piece.ts'

export type WhichPieces = 'open' | 'done'

interface PieceColumn {
  name:
    | 'label'
    | 'recipe'
    | 'cooker'
    | 'stage'
    | 'on'
    | 'wrap'
    | 'pull'
    | 'cooked'
    | 'weight'
    | 'sliced'
    | 'yield'
  numeric?: boolean
}

/** What a person asks of a piece that is on, and of one that is done. */
export const pieceColumns: Record<WhichPieces, readonly PieceColumn[]> = {
  open: [
    { name: 'label' },
    { name: 'recipe' },
    { name: 'cooker' },
    { name: 'stage' },
    { name: 'on', numeric: true },
    { name: 'wrap', numeric: true },
    { name: 'pull', numeric: true },
    { name: 'weight', numeric: true },
  ],
  done: [
    { name: 'label' },
    { name: 'recipe' },
    { name: 'cooker' },
    { name: 'on', numeric: true },
    { name: 'wrap', numeric: true },
    { name: 'pull', numeric: true },
    { name: 'cooked', numeric: true },
    { name: 'weight', numeric: true },
    { name: 'sliced', numeric: true },
    { name: 'yield', numeric: true },
  ],
}

/** The share of the raw weight that was sliced, or cooked where nobody weighed the slices; null when neither was weighed. */
export function yieldOf({
  rawKg,
  slicedKg,
  cookedKg,
}: Pick<Piece, 'rawKg' | 'slicedKg' | 'cookedKg'>): number | null {
  const sold = slicedKg ?? cookedKg
  return sold === null ? null : sold / rawKg
}
