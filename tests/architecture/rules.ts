import { builtinModules } from 'node:module'
import type { Import, Source, Use } from './read-source.ts'

/** A rule of the house: what it says, and every place that breaks it with what to do there. */
export interface Rule {
  name: string
  /** What to do about a breach. */
  advice: string
  breaches: (source: Source) => string[]
}

const clock = 'src/shared/domain/clock.ts'
const random = 'src/shared/domain/random.ts'

/** Folders with code of ours, and what each may import of the others. Tests and the root's files may import all. */
const arrows: { from: string; to: string[]; advice: string }[] = [
  {
    from: 'src/shared/',
    to: ['src/shared/'],
    advice: 'Shared code serves every side: move what both need into src/shared, or pass it in.',
  },
  { from: 'src/', to: ['src/'], advice: 'The client knows the server by src/shared/contract only.' },
  {
    from: 'simulators/',
    to: ['simulators/', 'src/shared/'],
    advice: 'Simulators build on src/shared alone.',
  },
  {
    from: 'broker/',
    to: ['broker/', 'src/shared/'],
    advice: 'Pass what the broker needs into createBroker().',
  },
  {
    from: 'server/demo/',
    to: ['server/', 'broker/', 'migrations/', 'seeds/', 'simulators/', 'src/shared/'],
    advice: 'The server does not know the client.',
  },
  {
    from: 'server/',
    to: ['server/', 'broker/', 'migrations/', 'seeds/', 'src/shared/'],
    advice: 'Only server/demo starts simulators, and the server does not know the client.',
  },
]

/** `it.skip`, `test.concurrent.only`, `context.skip` in a running test, `xit()` and their like. */
const marksTest =
  /^(?:(?:it|test|describe|suite|context|ctx)(?:\.\w+)*\.(?:skip|only|todo|skipIf|runIf|fails)|[xf](?:it|test|describe)\(\))$/

export const rules: Rule[] = [
  ...arrows.map(({ from, to, advice }) => ({
    name: `${from} imports of ours only ${to.join(', ')}`,
    advice,
    breaches: (source: Source) =>
      arrowFor(source) === from
        ? importsWhere(source, ({ target }) => target !== undefined && !startsWithAny(target, to))
        : [],
  })),
  {
    name: 'src/shared is pure: no packages but zod, and two for numbers in src/shared/forecast',
    advice: 'Take clock, chance, files and network as arguments; do the rest with the language alone.',
    breaches: (source) => {
      if (!source.path.startsWith('src/shared/') || isTest(source)) return []
      const numeric = ['simple-statistics', 'ml-levenberg-marquardt']
      const allowed = ['zod', ...(source.path.startsWith('src/shared/forecast/') ? numeric : [])]
      return importsWhere(source, (one) => one.target === undefined && !allowed.includes(one.specifier))
    },
  },
  {
    name: 'src/shared/domain and src/shared/forecast do not know the contract',
    advice: 'The contract is built from the domain: move the type into the domain.',
    breaches: (source) =>
      startsWithAny(source.path, ['src/shared/domain/', 'src/shared/forecast/'])
        ? importsWhere(source, ({ target }) => startsWithAny(target, ['src/shared/contract/']))
        : [],
  },
  {
    name: 'src/shared/contract takes types from src/shared/forecast, not the model',
    advice: 'Import from src/shared/forecast/types.ts, or with `import type`.',
    breaches: (source) =>
      source.path.startsWith('src/shared/contract/')
        ? importsWhere(
            source,
            ({ target, typeOnly }) =>
              startsWithAny(target, ['src/shared/forecast/']) &&
              !typeOnly &&
              target !== 'src/shared/forecast/types.ts',
          )
        : [],
  },
  {
    name: "the client uses nothing of Node's",
    advice: 'The browser has no Node: move it to the server.',
    breaches: (source) =>
      source.path.startsWith('src/') && !isTest(source) ? importsWhere(source, isNodeModule) : [],
  },
  {
    name: 'views import shared, components, composables, stores, api, router, assets and their own folder',
    advice: 'What two views need goes to src/components or src/composables.',
    breaches: (source) => {
      const folder = /^src\/views\/[^/]+\//.exec(source.path)?.[0]
      if (!source.path.startsWith('src/views/')) return []
      const shared = ['shared', 'components', 'composables', 'stores', 'api', 'router', 'assets']
      const allowed = [...shared.map((name) => `src/${name}/`), ...(folder === undefined ? [] : [folder])]
      return importsWhere(source, ({ target }) => target !== undefined && !startsWithAny(target, allowed))
    },
  },
  {
    name: 'a feature reaches another through its service only',
    advice: "Call the other feature's service.ts (or index.ts), and add what is missing there.",
    breaches: (source) => {
      const own = featureOf(source.path)
      if (own === undefined) return []
      return importsWhere(source, ({ target }) => {
        const other = featureOf(target)
        return other !== undefined && other !== own && !/\/(?:service|index)\.ts$/.test(target ?? '')
      })
    },
  },
  {
    name: 'only server/config.ts reads the environment',
    advice: 'Read it in server/config.ts and pass the value on.',
    breaches: (source) => {
      const free = ['server/config.ts', 'server/setup/', 'simulators/main.ts', 'tests/']
      const exempt =
        startsWithAny(source.path, free) || isScript(source) || isTest(source) || isAtRoot(source)
      return exempt ? [] : usesWhere(source, ({ what }) => /^(?:globalThis\.)?process\.env$/.test(what))
    },
  },
  {
    name: 'only the clock reads the time and only the random source draws',
    advice: `Take a Clock or a Random as an argument (${clock}, ${random}).`,
    breaches: (source) =>
      source.path === clock || source.path === random || isScript(source)
        ? []
        : usesWhere(source, ({ what }) => ['Date.now', 'new Date()', 'Math.random'].includes(what)),
  },
  {
    name: 'no file has more than 400 lines',
    advice: 'Split it by what its parts are for; look again from 250 on.',
    breaches: ({ path, lines }) => (lines > 400 ? [`${path} has ${lines} lines`] : []),
  },
  {
    name: 'no test is skipped, focused or left for later',
    advice: 'Mend it or take it out; a test that does not run proves nothing.',
    breaches: (source) => (isTest(source) ? usesWhere(source, ({ what }) => marksTest.test(what)) : []),
  },
]

/** The first arrow that fits is the one that counts. */
function arrowFor(source: Source): string | undefined {
  return arrows.find(({ from }) => source.path.startsWith(from))?.from
}

function importsWhere(source: Source, test: (one: Import) => boolean): string[] {
  return source.imports
    .filter(test)
    .map(({ specifier, line }) => `${source.path}:${line} imports ${specifier}`)
}

function usesWhere(source: Source, test: (use: Use) => boolean): string[] {
  return source.uses.filter(test).map(({ what, line }) => `${source.path}:${line} uses ${what}`)
}

function startsWithAny(path: string | undefined, starts: string[]): boolean {
  return path !== undefined && starts.some((start) => path.startsWith(start))
}

function isNodeModule({ specifier }: Import): boolean {
  return specifier.startsWith('node:') || builtinModules.includes(specifier.split('/')[0] ?? '')
}

function featureOf(path: string | undefined): string | undefined {
  return /^server\/features\/([^/]+)\//.exec(path ?? '')?.[1]
}

function isTest({ path }: Source): boolean {
  return path.endsWith('.test.ts')
}

function isScript({ path }: Source): boolean {
  return path.endsWith('.mjs')
}

function isAtRoot({ path }: Source): boolean {
  return !path.includes('/')
}
