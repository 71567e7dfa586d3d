import { chmodSync, mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterEach, beforeEach, expect, it } from 'vitest'
import { findPostgres } from './find-postgres.mjs'

let base: string

beforeEach(() => (base = mkdtempSync(join(tmpdir(), 'coalhand-find-'))))
afterEach(() => rmSync(base, { recursive: true }))

/** Puts programs into a folder that answer to --version only. */
function install(folder: string, version: string, names = ['initdb', 'pg_ctl', 'postgres']): string {
  mkdirSync(join(base, folder), { recursive: true })
  for (const name of names) {
    writeFileSync(join(base, folder, name), `#!/bin/sh\necho "${name} (PostgreSQL) ${version}"\n`)
    chmodSync(join(base, folder, name), 0o755)
  }
  return join(base, folder)
}

const find = (version?: number) =>
  findPostgres({ root: base, path: join(base, 'path'), ...(version === undefined ? {} : { version }) })

it('finds nothing where nothing is', () => {
  expect(find()).toBeUndefined()
})

it('takes the newest by number, not by letter', () => {
  install('9/bin', '9.6')
  const newest = install('15/bin', '15.3')
  expect(find()).toEqual({ directory: newest, version: 15 })
})

it('finds the version that made the data', () => {
  const older = install('15/bin', '15.3')
  install('17/bin', '17.1')
  expect(find(15)).toEqual({ directory: older, version: 15 })
  expect(find(16)).toBeUndefined()
})

it("passes over the client's programs alone", () => {
  install('15/bin', '15.3', ['psql'])
  expect(find()).toBeUndefined()
})

it('looks into PATH after that', () => {
  const elsewhere = install('path', '16.2 (Homemade 2)')
  expect(find()).toEqual({ directory: elsewhere, version: 16 })
  expect(find(15)).toBeUndefined()
})
