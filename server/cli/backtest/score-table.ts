import { pinballLoss } from '#shared/forecast/conformal.ts'
import { cookPartOf, cookParts } from '#shared/forecast/cook-part.ts'
import type { Target } from '#shared/forecast/correction.ts'
import type { RuleAnswer } from './simple-rules.ts'

interface Tally {
  asked: number
  said: number
  intervals: number
  absolute: number
  bias: number
  covered: number
  width: number
  pinball: number
}

export interface ScoreTable {
  /** Takes an answer (remaining seconds) or its absence, with what came. */
  add(who: string, target: Target, coreC: number, answer: RuleAnswer | undefined, truthS: number): void
  /** The table as text, minutes. */
  text(): string
}

/** Scores of forecasts by target, part of the cook and who made them. */
export function createScoreTable(): ScoreTable {
  const tallies = new Map<string, Tally>()
  const order: string[] = []
  const tallyOf = (who: string, target: Target, part: string): Tally => {
    if (!order.includes(who)) order.push(who)
    const key = `${target}|${part}|${who}`
    const known = tallies.get(key)
    if (known) return known
    const fresh = { asked: 0, said: 0, intervals: 0, absolute: 0, bias: 0, covered: 0, width: 0, pinball: 0 }
    tallies.set(key, fresh)
    return fresh
  }
  return {
    add: (who, target, coreC, answer, truthS) => {
      const part = cookParts[Number.isNaN(coreC) ? 0 : cookPartOf(coreC)] ?? 'whole'
      for (const tally of [tallyOf(who, target, part), tallyOf(who, target, 'whole')]) {
        tally.asked++
        if (!answer) continue
        tally.said++
        tally.absolute += Math.abs(answer.p50 - truthS)
        tally.bias += answer.p50 - truthS
        const { p10, p50, p90 } = answer
        if (p10 === undefined || p90 === undefined) continue
        tally.intervals++
        tally.covered += truthS >= p10 && truthS <= p90 ? 1 : 0
        tally.width += p90 - p10
        tally.pinball +=
          (pinballLoss(truthS, p10, 0.1) + pinballLoss(truthS, p50, 0.5) + pinballLoss(truthS, p90, 0.9)) / 3
      }
    },
    text: () => {
      const lines: string[] = []
      for (const target of ['wrap', 'pull'] as const) {
        lines.push(`${target}: minutes`.padEnd(28) + '    said     MAE    bias   cover   width  pinball')
        for (const part of [...cookParts, 'whole']) {
          for (const who of order) {
            const tally = tallies.get(`${target}|${part}|${who}`)
            if (tally) lines.push(line(part, who, tally))
          }
        }
        lines.push('')
      }
      return lines.join('\n')
    },
  }
}

function line(part: string, who: string, tally: Tally): string {
  const minutes = (sum: number, count: number) =>
    (count > 0 ? (sum / count / 60).toFixed(1) : '-').padStart(8)
  const cover = (
    tally.intervals > 0 ? `${((100 * tally.covered) / tally.intervals).toFixed(0)} %` : '-'
  ).padStart(8)
  const said = `${tally.said}/${tally.asked}`.padStart(9)
  return (
    `  ${part.padEnd(12)}${who.padEnd(14)}${said}` +
    minutes(tally.absolute, tally.said) +
    minutes(tally.bias, tally.said) +
    cover +
    minutes(tally.width, tally.intervals) +
    minutes(tally.pinball, tally.intervals)
  )
}
