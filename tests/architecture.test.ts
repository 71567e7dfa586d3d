import { readdirSync, readFileSync } from 'node:fs'
import { join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { describe, expect, it } from 'vitest'
import { readSource } from './architecture/read-source.ts'
import { rules } from './architecture/rules.ts'

const root = fileURLToPath(new URL('../', import.meta.url))
const folders = ['src', 'server', 'broker', 'simulators', 'migrations', 'seeds', 'tests']

const paths = [
  ...readdirSync(root),
  ...folders.flatMap((folder) =>
    readdirSync(join(root, folder), { recursive: true, encoding: 'utf8' }).map((name) => `${folder}/${name}`),
  ),
].filter((path) => /\.(?:ts|mts|mjs|vue)$/.test(path))

const sources = paths.map((path) => readSource(path, readFileSync(join(root, path), 'utf8')))

describe('the house keeps its arrows', () => {
  it('was looked through as a whole', () => {
    const seen = (start: string) => sources.filter(({ path }) => path.startsWith(start)).length
    expect(seen('src/shared/domain/clock.ts')).toBe(1)
    expect(seen('src/')).toBeGreaterThan(10)
    expect(seen('server/')).toBeGreaterThan(10)
    expect(sources.flatMap(({ imports }) => imports).length).toBeGreaterThan(100)
  })

  for (const { name, advice, breaches } of rules) {
    it(name, () => {
      expect(sources.flatMap(breaches), advice).toEqual([])
    })
  }
})
