import { writeFileSync } from 'node:fs'
import { performance } from 'node:perf_hooks'
import { parseArgs } from 'node:util'
import { readyHouse } from '#shared/forecast/answer.ts'
import { targets, type Target } from '#shared/forecast/correction.ts'
import { forecastPiece } from '#shared/forecast/forecast.ts'
import { generalHouse } from '#shared/forecast/general-house.ts'
import { learnHouse } from '#shared/forecast/learn-house.ts'
import type { Forecast, NoForecastReason, ReachTimes } from '#shared/forecast/types.ts'
import type { FinishedCook } from '#shared/forecast/finished-cook.ts'
import { loadCooks, type LoadedCooks } from './backtest/load-cooks.ts'
import { createScoreTable } from './backtest/score-table.ts'
import { coreAt, createSimpleRules, ruleNames } from './backtest/simple-rules.ts'

/**
 * Walks forward through finished cooks and says at each moment what the product would have said then:
 * `npm run --silent backtest -- --cooks DIR [--history DIR] [--every MINUTES] [--out FILE]`. One JSON object a line
 * goes to the file or to standard output, the table of scores to standard error. Exit code 1 where a file was broken,
 * 2 where the command itself was.
 */
const usage = 'npm run --silent backtest -- --cooks DIR [--history DIR] [--every MINUTES] [--out FILE]'
const firstS = 1800

try {
  process.exitCode = main()
} catch (error) {
  process.stderr.write(`${error instanceof Error ? error.message : String(error)}\nUse: ${usage}\n`)
  process.exitCode = 2
}

function main(): number {
  const { values } = parseArgs({
    options: {
      cooks: { type: 'string' },
      history: { type: 'string' },
      every: { type: 'string', default: '15' },
      out: { type: 'string' },
    },
  })
  if (values.cooks === undefined) throw new Error('--cooks is missing')
  const everyS = Number(values.every) * 60
  if (!(everyS >= 60)) throw new Error('--every takes a number of minutes from 1')
  const loaded = loadCooks(values.cooks)
  const history: LoadedCooks =
    values.history === undefined ? { cooks: [], faults: [] } : loadCooks(values.history)
  const faults = [...loaded.faults, ...history.faults]
  for (const fault of faults) process.stderr.write(`skipped: ${fault}\n`)
  if (loaded.cooks.length === 0) throw new Error('no cook could be read')

  const learnStart = performance.now()
  const house = history.cooks.length > 0 ? learnHouse(history.cooks, { general: generalHouse }) : generalHouse
  const learnS = (performance.now() - learnStart) / 1000
  const { lines, milliseconds, table } = walk(loaded.cooks, history.cooks, readyHouse(house), everyS)
  if (values.out === undefined) process.stdout.write(lines.join(''))
  else writeFileSync(values.out, lines.join(''))

  milliseconds.sort((a, b) => a - b)
  const share = (part: number) => (milliseconds[Math.floor(part * (milliseconds.length - 1))] ?? 0).toFixed(2)
  process.stderr.write(
    `${loaded.cooks.length} cooks, ${history.cooks.length} of history (learned in ${learnS.toFixed(1)} s)\n\n${table}` +
      `time per forecast: median ${share(0.5)} ms, 99th percentile ${share(0.99)} ms, ${milliseconds.length} forecasts\n`,
  )
  return faults.length > 0 ? 1 : 0
}

function walk(
  cooks: readonly FinishedCook[],
  history: readonly FinishedCook[],
  house: ReturnType<typeof readyHouse>,
  everyS: number,
) {
  const table = createScoreTable()
  const rules = createSimpleRules(history)
  const milliseconds: number[] = []
  const lines: string[] = []
  for (const cook of cooks) {
    const lastS = cook.readings.elapsedS[cook.readings.elapsedS.length - 1] ?? 0
    const endS = cook.pullReachedS ?? lastS
    for (let atS = Math.ceil(firstS / everyS) * everyS; atS < endS; atS += everyS) {
      const start = performance.now()
      const forecast = forecastPiece(cook.facts, cook.readings, cook.events, { atS, house })
      milliseconds.push(performance.now() - start)
      lines.push(`${JSON.stringify(outputOf(cook.facts.id, forecast))}\n`)
      const coreC = coreAt(cook, atS)
      for (const target of targets) {
        const reachedS = target === 'wrap' ? cook.wrapReachedS : cook.pullReachedS
        if (reachedS === undefined || reachedS <= atS) continue
        const truthS = reachedS - atS
        table.add('coalhand', target, coreC, remaining(forecast, target), truthS)
        for (const rule of ruleNames)
          table.add(rule, target, coreC, rules.answer(rule, cook, atS, target), truthS)
      }
    }
  }
  return { lines, milliseconds, table: table.text() }
}

function remaining(forecast: Forecast, target: Target) {
  const times = forecast[target]
  return times
    ? { p10: times.p10 - forecast.atS, p50: times.p50 - forecast.atS, p90: times.p90 - forecast.atS }
    : undefined
}

function outputOf(id: string, { atS, phase, wrap, pull, wrapReason, pullReason }: Forecast) {
  return {
    id,
    at_s: atS,
    phase,
    wrap: outputTimes(wrap),
    ...outputReason('wrap_reason', wrapReason),
    pull: outputTimes(pull),
    ...outputReason('pull_reason', pullReason),
  }
}

function outputTimes(times: ReachTimes | null) {
  return times ? { p10: Math.round(times.p10), p50: Math.round(times.p50), p90: Math.round(times.p90) } : null
}

function outputReason(name: string, reason: NoForecastReason | undefined): Record<string, string> {
  return reason === undefined ? {} : { [name]: reason }
}
