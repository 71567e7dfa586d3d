import { spawn } from 'node:child_process'
import process from 'node:process'
import { createInterface } from 'node:readline'
import { findProgram } from './find-program.mjs'
import { SetupError } from './steps.mjs'

/**
 * Sees to it that Debian's packages are there: installs what is missing when it may (root, or sudo without
 * a password), else names the one command that a person has to run.
 *
 * @param {Record<string, () => boolean>} wanted package name -> whether what it brings is there
 * @param {(text: string) => void} say
 * @throws {SetupError} when something is missing and cannot be installed from here
 */
export async function provideDebianPackages(wanted, say) {
  const missing = Object.keys(wanted).filter((name) => !wanted[name]())
  if (missing.length === 0) return
  const names = missing.join(' and ')
  if (findProgram('apt-get') === undefined) {
    throw new SetupError(`${names} not found. Install what Debian calls ${names}, then run this again.`)
  }
  const asRoot = await waysToRoot()
  if (asRoot === undefined) {
    throw new SetupError(`${names} not found. Run this, then try again: ${command(missing)}`)
  }
  say(`${names} not found, installing from Debian`)
  await sayWhyOnFailure(missing, async () => {
    await run([...asRoot, 'sh', '-c', noMainCluster])
    await run([...asRoot, 'apt-get', '-q', '-o', 'Acquire::Retries=3', 'update'])
    await apt(asRoot, missing, say)
  })
  const still = missing.filter((name) => !wanted[name]())
  if (still.length > 0)
    throw new SetupError(`${still.join(' and ')} installed, but its programs are not found.`)
}

/** Debian's package would start a server of its own on port 5432; nobody asked for that one. */
const noMainCluster = `
  file=/etc/postgresql-common/createcluster.conf
  mkdir -p /etc/postgresql-common
  grep -qs '^ *create_main_cluster' $file || echo 'create_main_cluster = false' >> $file`

function command(packages) {
  const sudo = process.getuid?.() === 0 ? '' : 'sudo '
  return `${sudo}apt-get update && ${sudo}apt-get install --yes ${packages.join(' ')}`
}

/** What to put before a command to run it as root: nothing, sudo, or undefined when neither will do. */
async function waysToRoot() {
  if (process.getuid?.() === 0) return []
  if (findProgram('sudo') === undefined) return undefined
  const sudo = ['sudo', '-n']
  try {
    await run([...sudo, 'true'])
    return sudo
  } catch {
    return undefined
  }
}

async function apt(asRoot, packages, say) {
  const environment = ['env', 'DEBIAN_FRONTEND=noninteractive', 'UCF_FORCE_CONFFOLD=1']
  // The progress on a channel of its own that ends in our pipe: sudo passes on no more than three, and where
  // apt writes it to stdout itself, packages' scripts can fail to write there. No terminal is made up either.
  const settings = ['DPkg::Lock::Timeout=300', 'Acquire::Retries=3', 'Dpkg::Use-Pty=0', 'APT::Status-Fd=3']
  const withChannel = ['sh', '-c', 'exec "$@" 3>&1', 'sh']
  let shown = 0
  const onLine = (line) => {
    // apt's own progress lines: "dlstatus:1:12.5:text" while loading, "pmstatus:package:40.0:text" after.
    const [, kind, percent, text] = /^(dl|pm)status:[^:]*:([\d.]+):(.*)$/.exec(line) ?? []
    if (kind === undefined) return
    const step = (kind === 'dl' ? 0 : 100) + Math.floor(Number(percent) / 20) * 20
    if (step <= shown) return
    shown = step
    say(`${kind === 'dl' ? 'loading' : 'installing'} ${Math.round(Number(percent))} %: ${text}`)
  }
  const options = ['--yes', '-q', '--no-install-recommends', ...settings.flatMap((one) => ['-o', one])]
  const install = ['apt-get', 'install', ...options, ...packages]
  await run([...asRoot, ...withChannel, ...environment, ...install], onLine)
}

async function sayWhyOnFailure(packages, work) {
  try {
    await work()
  } catch (error) {
    throw new SetupError(
      `${packages.join(' and ')} could not be installed: ${error.message}\n` +
        `Run this, then try again: ${command(packages)}`,
    )
  }
}

/** Runs a command; its lines go to `onLine`, its last ones into the error when it fails. */
function run([program, ...args], onLine = () => {}) {
  return new Promise((resolve, reject) => {
    const child = spawn(program, args, { stdio: ['ignore', 'pipe', 'pipe'] })
    const last = []
    const take = (line) => {
      onLine(line)
      if (!/^(dl|pm)status:/.test(line)) last.push(line)
      last.splice(0, last.length - 12)
    }
    createInterface({ input: child.stdout }).on('line', take)
    createInterface({ input: child.stderr }).on('line', take)
    child.on('error', reject)
    child.on('close', (code) => {
      if (code === 0) resolve()
      else reject(new Error(last.join('\n').trim() || `${program} ended with ${code}`))
    })
  })
}
