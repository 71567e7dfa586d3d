import type { LaneData, LanePiece, Say } from '@/components/chart/lane-data.ts'
import { reasonText } from '@/components/chart/piece-texts.ts'

/** A lane in one sentence, for who cannot see it: the cooker, its pit, and each piece with what comes next. */
export function laneSentence(name: string, pit: string, data: LaneData, say: Say): string {
  const pieces = data.pieces.map((piece) => pieceSentence(piece, data.window.now, say))
  return say.words('chart.lane', {
    name,
    pit,
    pieces: pieces.length > 0 ? pieces.join('; ') : say.words('chart.nothingOn'),
  })
}

function pieceSentence(piece: LanePiece, now: number, say: Say): string {
  const parts = [piece.label]
  if (piece.latest !== null && piece.silentSince === null) parts.push(say.temperature(piece.latest.c))
  if (piece.silentSince !== null)
    parts.push(say.words('chart.silent', { span: say.duration(now - piece.silentSince) }))
  if (piece.pull !== null) {
    const span = say.interval(piece.pull.p10, piece.pull.p90)
    parts.push(say.words('chart.pullAt', { at: say.clock(piece.pull.p50), span }))
    if (piece.risk !== null) parts.push(say.words(`chart.risk.${piece.risk}`))
  } else if (piece.holdAt !== null) {
    parts.push(say.words('chart.held', { span: say.duration(now - piece.holdAt) }))
  } else if (piece.restAt !== null) {
    parts.push(say.words('chart.resting', { span: say.duration(now - piece.restAt) }))
  } else if (piece.pulledAt !== null) {
    parts.push(say.words('chart.pulled', { span: say.duration(now - piece.pulledAt) }))
  } else {
    parts.push(reasonText(piece, say) ?? '')
  }
  return parts.filter((part) => part !== '').join(', ')
}
