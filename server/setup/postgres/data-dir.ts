import { chown, mkdir, realpath, rename, stat, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { errorCode } from './error-code.ts'
import { PostgresUnavailable } from './errors.ts'

/**
 * Makes the data folder when it is missing and returns its true path. Others may enter it, as PostgreSQL's
 * user has to, but not list it; every secret in it has mode 600.
 */
export async function prepareDataDir(dataDir: string): Promise<string> {
  try {
    await mkdir(dataDir, { recursive: true, mode: 0o711 })
    return await realpath(dataDir)
  } catch (error) {
    throw new PostgresUnavailable(
      `The data folder ${dataDir} cannot be made (${errorCode(error)}): choose another in DATA_DIR.`,
    )
  }
}

/**
 * Writes a file of the data folder for its owner's eyes only, in one go: a kill in the middle leaves the old
 * one. Root writes it for the folder's owner, so that one start as root locks nobody out.
 */
export async function writePrivate(dataDir: string, name: string, text: string): Promise<void> {
  const file = join(dataDir, name)
  await writeFile(`${file}.new`, text, { mode: 0o600 })
  if (process.getuid?.() === 0) {
    const { uid, gid } = await stat(dataDir)
    await chown(`${file}.new`, uid, gid)
  }
  await rename(`${file}.new`, file)
}
