import { mkdirSync, mkdtempSync, rmSync, utimesSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterEach, beforeEach, expect, it } from 'vitest'
import { buildClientWhenStale, clientIsStale } from './client-build.mjs'

let root: string
let said: string[]

/** Stands where Vite would: writes a page into the folder that it is told to build into. */
const vite = `
  const { mkdirSync, writeFileSync } = require('node:fs')
  const folder = process.argv[process.argv.indexOf('--outDir') + 1]
  mkdirSync(folder, { recursive: true })
  writeFileSync(folder + '/index.html', 'built')
  process.exit(require('node:fs').existsSync('broken') ? 1 : 0)`

beforeEach(() => {
  root = mkdtempSync(join(tmpdir(), 'coalhand-client-'))
  said = []
  put('src/views/wall/WallView.vue', '<template />')
  put('index.html', '<html>')
  put('node_modules/vite/bin/vite.js', vite)
})
afterEach(() => rmSync(root, { recursive: true }))

function put(file: string, text: string): void {
  mkdirSync(join(root, file, '..'), { recursive: true })
  writeFileSync(join(root, file), text)
}

const build = () => buildClientWhenStale(root, (text) => said.push(text))

it('builds once, and not again while nothing changes', async () => {
  expect(clientIsStale(root)).toBe(true)
  await build()
  expect(clientIsStale(root)).toBe(false)
  expect(await build()).toBe('built')
  expect(said).toHaveLength(1)
})

it.each(['src/views/wall/WallView.vue', 'src/new.ts', 'index.html', 'vite.config.ts', 'package-lock.json'])(
  'builds again when %s changes',
  async (file) => {
    await build()
    put(file, 'changed')
    expect(clientIsStale(root)).toBe(true)
  },
)

it('does not mind a test, nor a file that was only touched', async () => {
  await build()
  put('src/views/wall/lane.test.ts', 'changed')
  utimesSync(join(root, 'index.html'), 2_000_000_000, 2_000_000_000)
  expect(clientIsStale(root)).toBe(false)
})

it('counts a build that failed as none', async () => {
  put('broken', '')
  await expect(build()).rejects.toThrow('could not be built')
  expect(clientIsStale(root)).toBe(true)
})
