// The developer's way: the server, started again whenever one of its files changes, and Vite with hot
// reload in front of it. Ctrl-C stops Vite, then the server, then the database.
import { spawn } from 'node:child_process'
import { join } from 'node:path'
import process from 'node:process'
import { clearTimeout, setTimeout } from 'node:timers'
import { fileURLToPath } from 'node:url'
import { tsImport } from 'tsx/esm/api'

/** How long the server may take to finish what it has begun. */
const patienceMs = 20_000

const root = fileURLToPath(new URL('../../', import.meta.url))
process.chdir(root)

const database = await holdDatabase()
const server = start('tsx/dist/cli.mjs', ['watch', '--clear-screen=false', 'server/main.ts'])
const vite = start('vite/bin/vite.js', ['--clearScreen', 'false'])

let stopping = false
for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP']) process.on(signal, () => void stop(0))
for (const part of [server, vite]) void part.ended.then(() => stop(1))

async function stop(exitCode) {
  if (stopping) return
  stopping = true
  await vite.stop()
  await server.stop()
  await database?.stop()
  process.exit(exitCode)
}

/** Kept from here, so that the server finds it running and starts again in no time. */
async function holdDatabase() {
  if (process.env.DATABASE_URL) return undefined
  const { startPostgres, PostgresUnavailable } = await tsImport('./postgres.ts', import.meta.url)
  try {
    return await startPostgres({ dataDir: process.env.DATA_DIR || '.data', log: console.log })
  } catch (error) {
    console.error(error instanceof PostgresUnavailable ? error.message : error)
    process.exit(1)
  }
}

/** In a process group of its own: Ctrl-C reaches this process only, which stops the others in order. */
function start(program, args) {
  const command = [join(root, 'node_modules', program), ...args]
  const child = spawn(process.execPath, command, { stdio: ['ignore', 'inherit', 'inherit'], detached: true })
  const ended = new Promise((resolve) => {
    child.on('close', resolve)
    child.on('error', resolve)
  })
  const stopPart = async () => {
    if (child.exitCode !== null || child.signalCode !== null) return
    child.kill('SIGTERM')
    const hurry = setTimeout(() => process.kill(-child.pid, 'SIGKILL'), patienceMs)
    await ended
    clearTimeout(hurry)
  }
  return { ended, stop: stopPart }
}
