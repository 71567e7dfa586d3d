import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterEach, beforeEach, describe, expect, it } from 'vitest'
import { readReport, testFilesUnder } from './report.mjs'

let root: string

beforeEach(() => (root = mkdtempSync(join(tmpdir(), 'coalhand-report-'))))
afterEach(() => rmSync(root, { recursive: true }))

interface FileResult {
  name: string
  status: string
  message?: string
  assertionResults: { fullName: string; status: string }[]
}

const test = (fullName: string, status = 'passed') => ({ fullName, status })

function read(results: FileResult[], expected = results.map(({ name }) => name)) {
  const testResults = results.map((result) => ({ ...result, name: join(root, result.name) }))
  writeFileSync(join(root, 'report.json'), JSON.stringify({ testResults }))
  return readReport(join(root, 'report.json'), root, expected)
}

describe('readReport', () => {
  it('counts what passed', () => {
    const results = [{ name: 'a.test.ts', status: 'passed', assertionResults: [test('one'), test('two')] }]
    expect(read(results)).toEqual({ passed: 2, faults: [] })
  })

  it.each(['failed', 'skipped', 'pending', 'todo'])('counts a %s test as a fault', (status) => {
    const file = status === 'failed' ? 'failed' : 'passed'
    const assertionResults = [test('one'), test('two', status)]
    const results = [{ name: 'a.test.ts', status: file, assertionResults }]
    const { passed, faults } = read(results)
    expect(passed).toBe(1)
    expect(faults).toEqual([expect.stringContaining('a.test.ts › two')])
  })

  it('counts a file that could not be loaded as a fault', () => {
    const results = [
      { name: 'a.test.ts', status: 'passed', assertionResults: [test('one')] },
      { name: 'b.test.ts', status: 'failed', message: 'Cannot find x\n at y', assertionResults: [] },
    ]
    expect(read(results).faults).toEqual(['b.test.ts: Cannot find x'])
  })

  it('says why the tests of a file were skipped when its set-up failed', () => {
    const assertionResults = [test('one', 'skipped')]
    const results = [{ name: 'a.test.ts', status: 'failed', message: 'no database', assertionResults }]
    expect(read(results)).toEqual({
      passed: 0,
      faults: ['a.test.ts › one (skipped)', 'a.test.ts: no database'],
    })
  })

  it('misses a test file that no project ran', () => {
    const results = [{ name: 'a.test.ts', status: 'passed', assertionResults: [test('one')] }]
    expect(read(results, ['a.test.ts', 'tests/forgotten.test.ts']).faults).toEqual([
      'tests/forgotten.test.ts: no project ran it',
    ])
  })

  it('takes a run without tests, or without a report, for a fault', () => {
    expect(read([]).faults).toEqual(['no test ran'])
    expect(readReport(join(root, 'none.json'), root, []).faults).toHaveLength(1)
  })
})

describe('testFilesUnder', () => {
  it('finds tests wherever code is', () => {
    for (const folder of ['src/shared/domain', 'tests/live', 'docs']) {
      mkdirSync(join(root, folder), { recursive: true })
      writeFileSync(join(root, folder, 'a.test.ts'), '')
      writeFileSync(join(root, folder, 'a.ts'), '')
    }
    expect(testFilesUnder(root)).toEqual(['src/shared/domain/a.test.ts', 'tests/live/a.test.ts'])
  })
})
