// Makes a fresh clone ready: run by npm before `npm start`, `npm test` and `npm run dev`.
// Nothing but Node's built-ins may be imported here: there may be no node_modules yet.
import process from 'node:process'
import { fileURLToPath } from 'node:url'

const modes = ['start', 'test', 'dev']
const mode = process.argv[2] ?? ''

const [major = 0, minor = 0] = process.versions.node.split('.').map(Number)
if (major !== 20 || minor < 19) {
  console.error(
    `Coalhand needs Node 20.19 or a later 20; this is Node ${process.versions.node}. ` +
      'Install Node 20 (for example Debian packages from nodejs.org) and run the command again.',
  )
  process.exit(1)
}
if (!modes.includes(mode)) {
  console.error(`Usage: node server/setup/prepare.mjs ${modes.join('|')}`)
  process.exit(1)
}

// Imported late, so that an old Node meets the sentence above and not a syntax error.
const { runSteps } = await import('./steps.mjs')
const { installPackages } = await import('./packages.mjs')
const { provideDebianPackages } = await import('./debian.mjs')
const { findPostgres } = await import('./find-postgres.mjs')
const { buildClientWhenStale } = await import('./client-build.mjs')
const { findProgram } = await import('./find-program.mjs')

const root = fileURLToPath(new URL('../../', import.meta.url))

const node = { title: 'Node', run: async () => `${process.versions.node}` }
const packages = { title: 'Packages', run: (say) => installPackages(root, say) }
const postgres = {
  title: 'PostgreSQL',
  run: async (say) => {
    // The tests always run on a server of their own, never on somebody's data.
    if (process.env.DATABASE_URL && mode !== 'test') return 'the server named by DATABASE_URL'
    await provideDebianPackages({ postgresql: () => findPostgres() !== undefined }, say)
    return `${findPostgres()?.version} in ${findPostgres()?.directory}`
  },
}
const testTools = {
  title: 'Test tools',
  run: async (say) => {
    await provideDebianPackages(
      {
        chromium: () => findProgram('chromium') !== undefined,
        'mosquitto-clients': () => findProgram('mosquitto_pub') !== undefined,
      },
      say,
    )
    return 'chromium and mosquitto_pub found'
  },
}
const client = { title: 'Client', run: (say) => buildClientWhenStale(root, say) }

const steps = {
  start: [node, postgres, packages, client],
  test: [node, postgres, testTools, packages, client],
  dev: [node, postgres, packages],
}
const ready = await runSteps(steps[mode])
// The tests cannot begin: said in the form in which they would have ended.
if (!ready && mode === 'test') console.log('0 passed, 1 failed')
process.exitCode = ready ? 0 : 1
