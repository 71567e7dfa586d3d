import { mkdirSync, mkdtempSync, rmSync, utimesSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterEach, beforeEach, expect, it } from 'vitest'
import { packagesAreStale } from './packages.mjs'

let root: string

beforeEach(() => {
  root = mkdtempSync(join(tmpdir(), 'coalhand-packages-'))
  mkdirSync(join(root, 'node_modules'))
  touch('package-lock.json', 100)
})
afterEach(() => rmSync(root, { recursive: true }))

function touch(file: string, atS: number): void {
  writeFileSync(join(root, file), '{}')
  utimesSync(join(root, file), atS, atS)
}

it('wants an installation where there is none, or one was broken off', () => {
  expect(packagesAreStale(root)).toBe(true)
  rmSync(join(root, 'node_modules'), { recursive: true })
  expect(packagesAreStale(root)).toBe(true)
})

it('wants one when the lock file is newer', () => {
  touch('node_modules/.package-lock.json', 99)
  expect(packagesAreStale(root)).toBe(true)
})

it('is content with an installation made after the lock file', () => {
  touch('node_modules/.package-lock.json', 101)
  expect(packagesAreStale(root)).toBe(false)
})
