import { performance } from 'node:perf_hooks'
import { parseArgs } from 'node:util'
import { seededRandom } from '#shared/domain/random.ts'
import { readyHouse } from '#shared/forecast/answer.ts'
import { targets } from '#shared/forecast/correction.ts'
import { forecastPiece } from '#shared/forecast/forecast.ts'
import { generalHouse } from '#shared/forecast/general-house.ts'
import { learnHouse } from '#shared/forecast/learn-house.ts'
import { createScoreTable } from '../../server/cli/backtest/score-table.ts'
import { coreAt, createSimpleRules, ruleNames } from '../../server/cli/backtest/simple-rules.ts'
import { drawCook } from './generator/cook.ts'
import { finishedCook } from './generator/finished-cook.ts'
import { drawHouse, type PieceLaw } from './generator/house.ts'
import { drawKitchen } from './generator/kitchen.ts'
import { drawSimulatorKitchen } from './generator/simulator-kitchen.ts'

/**
 * The back-test's table over several generated houses at once, without files:
 * `node --import tsx tests/forecast/report.ts --from 1000 --to 1003 --history 100 --cooks 60 --laws 0.5,0.5,0`
 * Tuning uses seeds 1 to 999, figures come from 1000 to 1999.
 */
const { values } = parseArgs({
  options: {
    from: { type: 'string', default: '1000' },
    to: { type: 'string', default: '1003' },
    history: { type: 'string', default: '100' },
    cooks: { type: 'string', default: '60' },
    every: { type: 'string', default: '15' },
    laws: { type: 'string' },
    physics: { type: 'string', default: 'own' },
  },
})
const draw = values.physics === 'simulator' ? drawSimulatorKitchen : drawKitchen
const historyCount = Number(values.history)
const cookCount = Number(values.cooks)
const everyS = Number(values.every) * 60
const table = createScoreTable()
const milliseconds: number[] = []
let learnS = 0
for (let seed = Number(values.from); seed <= Number(values.to); seed++) {
  const testHouse = drawHouse(seededRandom('house', seed), lawShares(values.laws))
  // The history is always the first hundred, so that the same cooks are forecast whatever part of it is used.
  const cook = (index: number) => finishedCook(drawCook(testHouse, seed, index, draw))
  const history = Array.from({ length: historyCount }, (_, i) => cook(i + 1))
  const cooks = Array.from({ length: cookCount }, (_, i) => cook(101 + i))
  const start = performance.now()
  const house = readyHouse(history.length > 0 ? learnHouse(history, { general: generalHouse }) : generalHouse)
  learnS += (performance.now() - start) / 1000
  const rules = createSimpleRules(history)
  for (const past of cooks) {
    const endS = past.pullReachedS ?? past.readings.elapsedS[past.readings.elapsedS.length - 1] ?? 0
    for (let atS = 1800; atS < endS; atS += everyS) {
      const began = performance.now()
      const forecast = forecastPiece(past.facts, past.readings, past.events, { atS, house })
      milliseconds.push(performance.now() - began)
      const coreC = coreAt(past, atS)
      for (const target of targets) {
        const reachedS = target === 'wrap' ? past.wrapReachedS : past.pullReachedS
        if (reachedS === undefined || reachedS <= atS) continue
        const times = forecast[target]
        const answer = times
          ? { p10: times.p10 - atS, p50: times.p50 - atS, p90: times.p90 - atS }
          : undefined
        table.add('coalhand', target, coreC, answer, reachedS - atS)
        for (const rule of ruleNames)
          table.add(rule, target, coreC, rules.answer(rule, past, atS, target), reachedS - atS)
      }
    }
  }
}
milliseconds.sort((a, b) => a - b)
const share = (part: number) => (milliseconds[Math.floor(part * (milliseconds.length - 1))] ?? 0).toFixed(2)
process.stdout.write(
  `seeds ${values.from} to ${values.to}, ${values.physics} physics ${values.laws ?? 'drawn'}, history ${historyCount}, ` +
    `learned in ${learnS.toFixed(0)} s\n${table.text()}` +
    `time per forecast: median ${share(0.5)} ms, 99th percentile ${share(0.99)} ms, ${milliseconds.length} forecasts\n`,
)

function lawShares(text: string | undefined): Record<PieceLaw, number> | undefined {
  if (text === undefined) return undefined
  const [vapour = 0, juice = 0, front = 0] = text.split(',').map(Number)
  return { vapour, juice, front }
}
