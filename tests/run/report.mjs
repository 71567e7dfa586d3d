import { existsSync, readdirSync, readFileSync } from 'node:fs'
import { join, relative } from 'node:path'

/**
 * Reads Vitest's JSON report: how many tests passed, and what is wrong in one line each. A test that was
 * skipped, a file that could not be loaded, a test file that no project ran and a run without tests are
 * faults like a failed test.
 *
 * @param {string} file the report
 * @param {string} root the repository's folder
 * @param {string[]} expected the test files there are, relative to root
 * @returns {{ passed: number, faults: string[] }}
 */
export function readReport(file, root, expected) {
  if (!existsSync(file)) return { passed: 0, faults: ['the test run left no report; see above'] }
  const { testResults } = JSON.parse(readFileSync(file, 'utf8'))
  const ran = new Set(testResults.map(({ name }) => relative(root, name)))
  const tests = testResults.flatMap(({ name, assertionResults }) =>
    assertionResults.map((test) => ({ ...test, file: relative(root, name) })),
  )
  const faults = [
    ...tests
      .filter(({ status }) => status !== 'passed')
      .map((test) => `${test.file} › ${test.fullName}${test.status === 'failed' ? '' : ` (${test.status})`}`),
    ...testResults
      .filter(({ status, assertionResults }) => status === 'failed' && !hasFailure(assertionResults))
      .map(({ name, message }) => `${relative(root, name)}: ${firstLine(message)}`),
    ...expected.filter((name) => !ran.has(name)).map((name) => `${name}: no project ran it`),
  ]
  if (tests.length === 0) faults.push('no test ran')
  return { passed: tests.filter(({ status }) => status === 'passed').length, faults }
}

/**
 * Every test file of the repository, relative to root.
 *
 * @param {string} root
 * @returns {string[]}
 */
export function testFilesUnder(root) {
  const tops = ['src', 'server', 'broker', 'simulators', 'migrations', 'seeds', 'tests']
  return tops
    .filter((top) => existsSync(join(root, top)))
    .flatMap((top) => readdirSync(join(root, top), { recursive: true }).map((name) => join(top, name)))
    .filter((name) => /\.(test|spec)\.\w+$/.test(name))
    .sort()
}

function hasFailure(assertionResults) {
  return assertionResults.some(({ status }) => status === 'failed')
}

function firstLine(message) {
  return message?.trim().split('\n')[0] || 'could not be run'
}
