import { parseArgs } from 'node:util'
import { clearEarlierRuns } from '../harness/run-folders.ts'
import { closeWorlds, worldPrefix } from './house/world.ts'
import { createReport, duration, type Scenario } from './report.ts'
import { deafDevices, deafPages, flood, manyConnections } from './scenarios/crowd.ts'
import { freezePostgres, stopPostgres } from './scenarios/database-away.ts'
import { killServer } from './scenarios/kill-server.ts'
import { outOfConnections } from './scenarios/out-of-connections.ts'
import { reconnectStorm } from './scenarios/reconnect-storm.ts'
import { restartPostgres } from './scenarios/restart-postgres.ts'

/**
 * What `npm run test:faults` runs: the server in earnest, PostgreSQL of its own, boxes over TCP, and what can go
 * wrong between them. Each scenario prints what it measured; the last line is `N passed, N failed`.
 *
 * `--only NAME` runs one (may be repeated), `--seed WORD` draws other moments.
 */
const scenarios: readonly Scenario[] = [
  killServer,
  restartPostgres,
  stopPostgres,
  freezePostgres,
  outOfConnections,
  reconnectStorm,
  flood,
  manyConnections,
  deafDevices,
  deafPages,
]

const { values } = parseArgs({
  options: { only: { type: 'string', multiple: true }, seed: { type: 'string', default: '1' } },
})
const chosen = scenarios.filter(({ name }) => values.only?.includes(name) ?? true)
const unknown = values.only?.filter((name) => !scenarios.some((scenario) => scenario.name === name)) ?? []
const print = (line: string) => console.log(line)

for (const signal of ['SIGINT', 'SIGTERM'] as const) {
  process.once(signal, () => void closeWorlds().finally(() => process.exit(1)))
}
await clearEarlierRuns(worldPrefix)

let passed = 0
const failed = unknown.map((name) => `there is no scenario “${name}”; there are ${names()}`)
for (const { name, title, run } of chosen) {
  print(`${name}: ${title}`)
  const report = createReport(name, print)
  const begun = performance.now()
  try {
    await run(report, values.seed)
  } catch (error) {
    report.check(
      'it runs to its end',
      false,
      error instanceof Error ? (error.stack ?? error.message) : String(error),
    )
  }
  print(`  took ${duration(performance.now() - begun)}`)
  passed += report.counts().passed
  failed.push(...report.counts().failed)
}
for (const fault of failed) print(`Failed: ${fault}`)
print(`${passed} passed, ${failed.length} failed`)
process.exitCode = failed.length === 0 && passed > 0 ? 0 : 1

function names(): string {
  return scenarios.map(({ name }) => name).join(', ')
}
