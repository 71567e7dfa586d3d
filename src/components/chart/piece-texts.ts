import type { Urgency } from '@/shared/domain/pit-state.ts'
import type { ChartStyle } from './chart-style.ts'
import type { LanePiece, Say } from './lane-data.ts'
import { fitText } from './text-width.ts'
import type { Run, TextBlock } from './text-block.ts'
import { textBlock } from './text-block.ts'

/** Labels are shortened to about this many characters' width where many stand together. */
const longestLabel = 11

/**
 * What stands at the end of a piece's line: its name and temperature; that it is silent, and how long; or, where
 * there is no forecast, why. From the roomiest form to the tightest.
 */
export function nowTexts(piece: LanePiece, now: number, style: ChartStyle, say: Say): TextBlock[] {
  const { palette, small } = style
  const name = nameRun(piece.label, style)
  const tightName = { ...name, size: small }
  if (!style.flags) return [textBlock([[tightName]])]
  const quiet = (text: string): Run => ({ text, size: small, fill: palette.quiet })
  if (piece.phase === 'done') {
    return [textBlock([[name, alarm(say.words('chart.pullNow'), 'soon', style)]])]
  }
  if (piece.silentSince !== null) {
    const silent = say.words('chart.silent', { span: say.duration(now - piece.silentSince) })
    return [textBlock([[name, alarm(silent, 'soon', style)]])]
  }
  const degrees = piece.latest === null ? [] : [quiet(say.temperature(piece.latest.c))]
  const why = reasonText(piece, say)
  if (why === null) return [textBlock([[name, ...degrees]]), textBlock([[tightName]])]
  return [textBlock([[name, ...degrees, quiet(why)]]), textBlock([[name, ...degrees], [quiet(why)]])]
}

/** The flag at the end of a fan: name, time, interval, from the roomiest form to the tightest. */
export function flagTexts(piece: LanePiece, style: ChartStyle, say: Say, prefix?: string): TextBlock[] {
  if (piece.pull === null) return []
  const { palette, time, small } = style
  const name = nameRun(piece.label, style)
  const lead: Run[] = prefix === undefined ? [] : [{ text: prefix, size: small, fill: palette.quiet }]
  const clock = say.clock(piece.pull.p50)
  const span: Run = { text: say.interval(piece.pull.p10, piece.pull.p90), size: small, fill: palette.quiet }
  const colour = piece.risk === null ? palette.text : palette[colourOf(piece.risk)]
  const large: Run = { text: clock, size: time, fill: colour, bold: true }
  const risk = piece.risk === null ? [] : [alarm(say.words(`chart.risk.${piece.risk}`), piece.risk, style)]
  const tight: Run = {
    text: say.words('chart.shortForecast', { at: clock, span: span.text }),
    size: small,
    fill: colour,
  }
  return [
    textBlock([[...lead, name, large, span, ...risk]]),
    textBlock([
      [...lead, name, large],
      [span, ...risk],
    ]),
    ...(risk.length > 0 ? [textBlock([[...lead, name, large], [span], risk])] : []),
    textBlock([[...lead, { ...name, size: small }, tight, ...risk]]),
  ]
}

/** What a piece does after its pull: rests, is held and at what temperature, or waits for either. */
export function restTexts(piece: LanePiece, now: number, style: ChartStyle, say: Say): TextBlock[] {
  const name = nameRun(piece.label, style)
  const since = piece.holdAt ?? piece.restAt ?? piece.pulledAt ?? now
  const key = piece.holdAt !== null ? 'chart.held' : piece.restAt !== null ? 'chart.resting' : 'chart.pulled'
  const state = say.words(key, { span: say.duration(now - since) })
  const quiet = (text: string): Run => ({ text, size: style.small, fill: style.palette.quiet })
  if (piece.latest === null || piece.silentSince !== null) return [textBlock([[name, quiet(state)]])]
  return [
    textBlock([[name, quiet(state), quiet(say.temperature(piece.latest.c))]]),
    textBlock([[{ ...name, size: style.small }, quiet(state)]]),
  ]
}

/** Many pieces in one line: how many, and between which temperatures. */
export function manyText(
  count: string,
  span: { lowC: number; highC: number } | null,
  style: ChartStyle,
  say: Say,
): TextBlock {
  const runs: Run[] = [{ text: count, size: style.text, fill: style.palette.text, bold: true }]
  if (span !== null) {
    const text = say.temperatureSpan(span.lowC, span.highC)
    runs.push({ text, size: style.small, fill: style.palette.quiet })
  }
  return textBlock([runs])
}

/** A word in amber or red, with its shape. */
export function alarm(text: string, urgency: Urgency, style: ChartStyle): Run {
  return { text, size: style.small, fill: style.palette[colourOf(urgency)], bold: true, warning: urgency }
}

/** Why a piece has no time, in words; null when it has one. */
export function reasonText(piece: LanePiece, say: Say): string | null {
  if (piece.pull !== null) return null
  if (piece.follows !== null) return say.words('chart.follows', { label: piece.follows })
  if (!piece.probed) return say.words('chart.noProbe')
  return piece.reason === null
    ? say.words('chart.noForecastYet')
    : say.words(`words.noForecast.${piece.reason}`)
}

function colourOf(urgency: Urgency): 'amber' | 'red' {
  return urgency === 'now' ? 'red' : 'amber'
}

function nameRun(label: string, style: ChartStyle): Run {
  const text = fitText(label, style.text, style.text * 0.6 * longestLabel)
  return { text, size: style.text, fill: style.palette.text, bold: true }
}
