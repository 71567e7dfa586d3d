import { describe, expect, it } from 'vitest'
import { readSource } from './read-source.ts'

const targets = (path: string, text: string) => readSource(path, text).imports.map(({ target }) => target)

describe('readSource', () => {
  it('finds every way of importing', () => {
    const text = [
      "import a from './a.ts'",
      "import '../side.ts'",
      "export { b } from '#shared/domain/b.ts'",
      "export * from '@/api/c.ts'",
      "const d = await import('./d.ts')",
      "const e = require('./e.cjs')",
      "type F = import('./f.ts').F",
      "import { z } from 'zod'",
    ].join('\n')
    expect(targets('server/live/hub.ts', text)).toEqual([
      'server/live/a.ts',
      'server/side.ts',
      'src/shared/domain/b.ts',
      'src/api/c.ts',
      'server/live/d.ts',
      'server/live/e.cjs',
      'server/live/f.ts',
      undefined,
    ])
  })

  it('is not taken in by comments and texts', () => {
    const text =
      "// import x from './x.ts'\nconst s = \"import y from './y.ts'; process.env\" /* Date.now() */"
    const { imports, uses } = readSource('server/a.ts', text)
    expect(imports).toEqual([])
    expect(uses).toEqual([])
  })

  it('knows what is gone at run time', () => {
    const text = [
      "import type { A } from './a.ts'",
      "import { type B, type C } from './b.ts'",
      "import { type D, e } from './c.ts'",
      "export type { F } from './d.ts'",
    ].join('\n')
    expect(readSource('server/a.ts', text).imports.map(({ typeOnly }) => typeOnly)).toEqual([
      true,
      true,
      false,
      true,
    ])
  })

  it("reads a component's scripts, with the lines of the whole file", () => {
    const text = [
      '<template><p>{{ Date.now() }}</p></template>',
      '<script lang="ts">',
      "import './a.ts'",
      '</script>',
      '<script setup lang="ts">',
      "import B from '@/components/B.vue'",
      '</script>',
    ].join('\n')
    const { imports, lines } = readSource('src/views/wall/WallView.vue', text)
    expect(imports.map(({ target, line }) => [target, line])).toEqual([
      ['src/views/wall/a.ts', 3],
      ['src/components/B.vue', 6],
    ])
    expect(lines).toBe(7)
  })

  it('notes what is read of the machine', () => {
    const text = 'const a = process.env.X\nconst b = Date.now()\nconst c = new Date()\nconst d = new Date(b)'
    expect(readSource('server/a.ts', text).uses).toEqual([
      { what: 'process.env.X', line: 1 },
      { what: 'process.env', line: 1 },
      { what: 'Date.now', line: 2 },
      { what: 'new Date()', line: 3 },
    ])
  })
})
