import { describe, expect, it } from 'vitest'
import { readSource } from './read-source.ts'
import { rules } from './rules.ts'

/** Names of the rules that a made-up file breaks. */
function broken(path: string, text: string): string[] {
  const source = readSource(path, text)
  return rules.filter(({ breaches }) => breaches(source).length > 0).map(({ name }) => name)
}

const importOf = (specifier: string) => `import { x } from '${specifier}'`

describe('each rule catches what it is for', () => {
  it.each([
    ['src/shared/domain/a.ts', '../../stores/live.ts', 'src/shared/ imports'],
    ['src/shared/domain/a.ts', '../../../server/config.ts', 'src/shared/ imports'],
    ['src/shared/domain/a.ts', 'node:fs', 'is pure'],
    ['src/shared/domain/a.ts', 'luxon', 'is pure'],
    ['src/shared/domain/a.ts', 'simple-statistics', 'is pure'],
    ['src/shared/domain/a.ts', '../contract/site.ts', 'do not know the contract'],
    ['src/shared/forecast/a.ts', '../contract/site.ts', 'do not know the contract'],
    ['src/shared/contract/a.ts', '../forecast/fit.ts', 'takes types'],
    ['src/stores/live.ts', '../../server/live/hub.ts', 'src/ imports'],
    ['src/stores/live.ts', 'fs', "nothing of Node's"],
    ['src/views/wall/WallView.ts', '@/views/cooks/CookView.vue', 'views import'],
    ['src/views/wall/WallView.ts', '@/main.ts', 'views import'],
    ['simulators/fleet.ts', '../server/config.ts', 'simulators/ imports'],
    ['simulators/fleet.ts', '../broker/broker.ts', 'simulators/ imports'],
    ['broker/broker.ts', '../server/config.ts', 'broker/ imports'],
    ['broker/broker.ts', '../simulators/fleet.ts', 'broker/ imports'],
    ['server/main.ts', '../simulators/fleet.ts', 'server/ imports'],
    ['server/main.ts', '../src/stores/live.ts', 'server/ imports'],
    ['server/demo/house.ts', '../../src/stores/live.ts', 'server/demo/ imports'],
    ['server/features/cooks/service.ts', '../pieces/repository.ts', 'a feature reaches'],
    ['server/features/cooks/service.ts', '../pieces/my-service.ts', 'a feature reaches'],
  ])('%s importing %s', (path, specifier, rule) => {
    expect(broken(path, importOf(specifier)).join('\n')).toContain(rule)
  })

  it.each([
    ['src/shared/contract/a.ts', '../forecast/types.ts'],
    ['src/shared/contract/a.ts', 'zod'],
    ['src/shared/forecast/a.ts', 'ml-levenberg-marquardt'],
    ['src/shared/forecast/a.ts', '../domain/cooking.ts'],
    ['src/shared/domain/a.test.ts', 'vitest'],
    ['src/views/wall/WallView.ts', './lane.ts'],
    ['src/views/wall/WallView.ts', '@/components/chart/Lane.vue'],
    ['src/views/wall/WallView.ts', 'vue'],
    ['simulators/fleet.ts', '#shared/domain/clock.ts'],
    ['simulators/fleet.ts', 'mqtt'],
    ['server/demo/house.ts', '../../simulators/fleet.ts'],
    ['server/main.ts', '../broker/broker.ts'],
    ['server/app.ts', './features/cooks/routes.ts'],
    ['server/features/cooks/service.ts', '../pieces/service.ts'],
    ['server/features/cooks/service.ts', './repository.ts'],
    ['tests/e2e/wall.test.ts', '../../server/main.ts'],
  ])('%s may import %s', (path, specifier) => {
    expect(broken(path, importOf(specifier))).toEqual([])
  })

  it('lets the contract name a type of the model', () => {
    const text = "import type { Fit } from '../forecast/fit.ts'"
    expect(broken('src/shared/contract/a.ts', text)).toEqual([])
  })

  it('knows who may read the environment', () => {
    const text = 'export const port = process.env.PORT'
    expect(broken('server/app.ts', text)).toEqual(['only server/config.ts reads the environment'])
    expect(broken('simulators/fleet.ts', text)).toEqual(['only server/config.ts reads the environment'])
    for (const path of [
      'server/config.ts',
      'server/setup/prepare.mjs',
      'simulators/main.ts',
      'vite.config.ts',
    ]) {
      expect(broken(path, text)).toEqual([])
    }
  })

  it.each(['Date.now()', 'new Date()', 'Math.random()'])('catches %s', (call) => {
    const name = 'only the clock reads the time and only the random source draws'
    expect(broken('tests/live/a.test.ts', `const x = ${call}`)).toEqual([name])
    expect(broken('src/shared/domain/clock.ts', `const x = ${call}`)).toEqual([])
  })

  it('counts lines', () => {
    expect(broken('server/a.ts', 'x\n'.repeat(400))).toEqual([])
    expect(broken('server/a.ts', 'x\n'.repeat(401))).toEqual(['no file has more than 400 lines'])
  })

  it.each([
    'it.skip',
    'it.concurrent.only',
    'context.skip',
    'it.only',
    'describe.skip',
    'test.todo',
    'it.skipIf',
    'describe.runIf',
    'xit',
    'fdescribe',
  ])('catches %s', (mark) => {
    const text = `${mark}('name', () => {})`
    expect(broken('server/a.test.ts', text)).toEqual(['no test is skipped, focused or left for later'])
  })
})
