import { spawn } from 'node:child_process'
import { createHash } from 'node:crypto'
import { existsSync, readdirSync, readFileSync, statSync, writeFileSync } from 'node:fs'
import { join } from 'node:path'
import process from 'node:process'
import { SetupError } from './steps.mjs'

/** What the built client is made from. Folders count with everything in them but tests. */
const sources = ['index.html', 'vite.config.ts', 'package.json', 'package-lock.json', 'public', 'src']
const builtFolder = 'dist/client'

/**
 * Builds the client into dist/client when what it is made from has changed since the last time.
 *
 * @param {string} root the repository's folder
 * @param {(text: string) => void} say
 * @returns {Promise<string>} a closing word
 * @throws {SetupError} when Vite fails; its own output has been shown
 */
export async function buildClientWhenStale(root, say) {
  const wanted = hashOfSources(root)
  if (!clientIsStale(root, wanted)) return 'built'
  say('building (about ten seconds)')
  const begun = process.hrtime.bigint()
  await viteBuild(root)
  // Written last: a build that was broken off counts as none.
  writeFileSync(join(root, builtFolder, '.built'), wanted)
  return `built in ${(Number(process.hrtime.bigint() - begun) / 1e9).toFixed(1)} s`
}

/**
 * Whether the built client is missing or was made from other sources.
 *
 * @param {string} root
 * @param {string} [wanted] the hash of the sources as they are
 * @returns {boolean}
 */
export function clientIsStale(root, wanted = hashOfSources(root)) {
  const mark = join(root, builtFolder, '.built')
  const page = join(root, builtFolder, 'index.html')
  return !existsSync(mark) || !existsSync(page) || readFileSync(mark, 'utf8') !== wanted
}

/** Contents, not times: a checkout of another branch and back changes times and nothing else. */
function hashOfSources(root) {
  const hash = createHash('sha256')
  for (const file of sources.flatMap((name) => filesUnder(root, name))) {
    hash
      .update(`${file}\0`)
      .update(readFileSync(join(root, file)))
      .update('\0')
  }
  return hash.digest('hex')
}

function filesUnder(root, name) {
  const stat = statSync(join(root, name), { throwIfNoEntry: false })
  if (stat === undefined || /\.test\.ts$/.test(name)) return []
  if (!stat.isDirectory()) return [name]
  return readdirSync(join(root, name))
    .sort()
    .flatMap((child) => filesUnder(root, `${name}/${child}`))
}

function viteBuild(root) {
  const vite = join(root, 'node_modules/vite/bin/vite.js')
  const args = [vite, 'build', '--logLevel', 'warn', '--outDir', join(root, builtFolder), '--emptyOutDir']
  return new Promise((resolve, reject) => {
    const child = spawn(process.execPath, args, { cwd: root, stdio: ['ignore', 'inherit', 'inherit'] })
    child.on('error', reject)
    child.on('close', (code) =>
      code === 0
        ? resolve()
        : reject(new SetupError('The client could not be built; the reason stands above.')),
    )
  })
}
