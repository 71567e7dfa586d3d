import { execFileSync } from 'node:child_process'
import { readFileSync } from 'node:fs'
import { join } from 'node:path'
import { z } from 'zod'

/** What runs: the package's version, with the commit where there is a repository. */
export function buildName(root: string): string {
  const { version } = z
    .object({ version: z.string() })
    .parse(JSON.parse(readFileSync(join(root, 'package.json'), 'utf8')))
  try {
    const commit = execFileSync('git', ['rev-parse', '--short', 'HEAD'], {
      cwd: root,
      encoding: 'utf8',
      stdio: ['ignore', 'pipe', 'ignore'],
    })
    return `${version}+${commit.trim()}`
  } catch {
    return version
  }
}
