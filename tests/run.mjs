// What `npm test` runs: format, lint, types and every test. All of it, even after a failure, so that one
// run shows everything that is wrong. The last line is `N passed, N failed`.
import { spawn } from 'node:child_process'
import { mkdirSync, rmSync } from 'node:fs'
import { join } from 'node:path'
import process from 'node:process'
import { fileURLToPath } from 'node:url'
import { readReport, testFilesUnder } from './run/report.mjs'

const root = fileURLToPath(new URL('../', import.meta.url))
const report = join(root, '.cache/vitest.json')

const checks = [
  {
    title: 'Format',
    command: ['node_modules/prettier/bin/prettier.cjs', '--check', '--log-level', 'warn', '.'],
  },
  {
    title: 'Lint',
    command: [
      'node_modules/eslint/bin/eslint.js',
      ...['.', '--max-warnings', '0', '--cache', '--cache-location', '.cache/eslint/'],
    ],
  },
  { title: 'Types', command: ['node_modules/vue-tsc/bin/vue-tsc.js', '--build'] },
]
const tests = {
  title: 'Tests',
  command: [
    'node_modules/vitest/vitest.mjs',
    ...['run', '--reporter=default', '--reporter=json', `--outputFile.json=${report}`],
  ],
}

let passed = 0
let failed = 0
const faults = []

mkdirSync(join(root, '.cache'), { recursive: true })
// A report left from an earlier run must never be counted.
rmSync(report, { force: true })

for (const [index, { title, command }] of [...checks, tests].entries()) {
  const step = `[${index + 1}/${checks.length + 1}] ${title}`
  console.log(`${step} …`)
  const begun = process.hrtime.bigint()
  const code = await run(command)
  const seconds = (Number(process.hrtime.bigint() - begun) / 1e9).toFixed(1)
  console.log(`${step}: ${code === 0 ? 'passed' : 'FAILED'} in ${seconds} s`)
  if (title !== tests.title) count(code === 0, title)
  else countTests(code)
}

for (const fault of faults) console.log(`Failed: ${fault}`)
console.log(`${passed} passed, ${failed} failed`)
process.exitCode = failed === 0 && passed > checks.length ? 0 : 1

function count(good, title) {
  if (good) passed += 1
  else {
    failed += 1
    faults.push(title)
  }
}

function countTests(code) {
  const result = readReport(report, root, testFilesUnder(root))
  passed += result.passed
  failed += result.faults.length
  faults.push(...result.faults)
  // Such as an error outside any test: the run failed, so it must show.
  if (code !== 0 && result.faults.length === 0) count(false, `the test run ended with ${code}; see above`)
}

function run(command) {
  return new Promise((resolve) => {
    const child = spawn(process.execPath, command, { cwd: root, stdio: ['ignore', 'inherit', 'inherit'] })
    child.on('error', (error) => {
      console.log(error.message)
      resolve(1)
    })
    child.on('close', (code) => resolve(code ?? 1))
  })
}
