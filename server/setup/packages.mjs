import { spawn } from 'node:child_process'
import { existsSync, readFileSync, statSync } from 'node:fs'
import { join } from 'node:path'
import process from 'node:process'
import { clearInterval, setInterval } from 'node:timers'
import { SetupError } from './steps.mjs'

const progressEveryMs = 3000

/**
 * Installs the packages of the lock file with `npm ci`, when they are not installed already.
 *
 * @param {string} root the repository's folder
 * @param {(text: string) => void} say
 * @returns {Promise<string>} a closing word
 * @throws {SetupError} when npm fails; its own output has been shown
 */
export async function installPackages(root, say) {
  if (!packagesAreStale(root)) return 'installed'
  const wanted = packagesOfLockFile(root)
  say(`installing ${wanted.length} packages (about a minute)`)
  const begun = process.hrtime.bigint()
  const seconds = () => Number((process.hrtime.bigint() - begun) / 1_000_000_000n)
  const progress = setInterval(() => {
    const present = wanted.filter((folder) => existsSync(join(root, folder, 'package.json'))).length
    say(`${present} of ${wanted.length} in place, ${seconds()} s`)
  }, progressEveryMs)
  try {
    await npmCi(root)
  } finally {
    clearInterval(progress)
  }
  return `${wanted.length} installed in ${seconds()} s`
}

/**
 * Whether `npm ci` is due: nothing installed, an installation broken off, or a lock file newer than it.
 *
 * @param {string} root
 * @returns {boolean}
 */
export function packagesAreStale(root) {
  // npm writes this file last, so it is missing when an installation was broken off.
  const installed = modified(join(root, 'node_modules/.package-lock.json'))
  const locked = modified(join(root, 'package-lock.json'))
  return installed === undefined || (locked !== undefined && locked > installed)
}

function modified(file) {
  return statSync(file, { throwIfNoEntry: false })?.mtimeMs
}

/** Folders that npm will fill; optional ones are left out, as many are for other machines. */
function packagesOfLockFile(root) {
  const lock = JSON.parse(readFileSync(join(root, 'package-lock.json'), 'utf8'))
  return Object.entries(lock.packages)
    .filter(([folder, entry]) => folder !== '' && !entry.optional && !entry.peerOptional)
    .map(([folder]) => folder)
}

function npmCi(root) {
  // The build and the tests need the developers' packages, whatever NODE_ENV says.
  const args = ['ci', '--include=dev', '--no-audit', '--no-fund', '--loglevel=error']
  const npm = process.env.npm_execpath
  const [command, ...rest] = npm ? [process.execPath, npm, ...args] : ['npm', ...args]
  return new Promise((resolve, reject) => {
    const child = spawn(command, rest, { cwd: root, stdio: ['ignore', 'inherit', 'inherit'] })
    child.on('error', (error) =>
      reject(
        new SetupError(`npm could not be started (${error.message}). Install npm, then run this again.`),
      ),
    )
    child.on('close', (code) =>
      code === 0
        ? resolve()
        : reject(new SetupError('npm ci failed; its reason stands above. Mend it and run this again.')),
    )
  })
}
