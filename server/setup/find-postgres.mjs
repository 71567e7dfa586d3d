import { execFileSync } from 'node:child_process'
import { readdirSync } from 'node:fs'
import { dirname, join } from 'node:path'
import { findProgram } from './find-program.mjs'

/** Debian keeps each major version's programs in a directory of its own, outside PATH. */
const debianRoot = '/usr/lib/postgresql'

/**
 * Finds PostgreSQL's server programs: the newest under Debian's root, else those in PATH.
 *
 * @param {{ version?: number, root?: string, path?: string }} [wanted]
 *   `version`: only this major version will do (the one that made the data)
 * @returns {{ directory: string, version: number } | undefined} undefined when there is none
 */
export function findPostgres({ version, root = debianRoot, path } = {}) {
  const debian = subdirectories(root)
    .filter((name) => /^\d+$/.test(name))
    .map((name) => ({ directory: join(root, name, 'bin'), version: Number(name) }))
    .filter(({ directory }) => isComplete(directory))
    .sort((a, b) => b.version - a.version)
  const fitting = (found) => version === undefined || found.version === version
  return debian.find(fitting) ?? [inPath(path)].find((found) => found !== undefined && fitting(found))
}

function inPath(path) {
  const initdb = findProgram('initdb', path)
  if (initdb === undefined || !isComplete(dirname(initdb))) return undefined
  const major = /(\d+)/.exec(execFileSync(initdb, ['--version'], { encoding: 'utf8' }))?.[1]
  return { directory: dirname(initdb), version: Number(major) }
}

function isComplete(directory) {
  return ['initdb', 'pg_ctl', 'postgres'].every((name) => findProgram(name, directory) !== undefined)
}

function subdirectories(directory) {
  try {
    return readdirSync(directory)
  } catch {
    return []
  }
}
