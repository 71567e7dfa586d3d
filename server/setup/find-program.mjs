import { accessSync, constants, statSync } from 'node:fs'
import { delimiter, join } from 'node:path'

/** Where Debian puts programs, searched after PATH: a service's PATH may be bare. */
const usual = ['/usr/local/bin', '/usr/bin', '/bin', '/usr/sbin', '/sbin']

/**
 * The full path of a program, or undefined when it is not installed.
 *
 * @param {string} name
 * @param {string} [path] directories to search, in the form of PATH
 * @returns {string | undefined}
 */
export function findProgram(name, path = [process.env.PATH ?? '', ...usual].join(delimiter)) {
  return path
    .split(delimiter)
    .filter((directory) => directory !== '')
    .map((directory) => join(directory, name))
    .find(isExecutable)
}

function isExecutable(file) {
  try {
    accessSync(file, constants.X_OK)
    return statSync(file).isFile()
  } catch {
    return false
  }
}
