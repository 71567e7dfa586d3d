import { spawn } from 'node:child_process'
import { PostgresUnavailable } from './errors.ts'

/** A user of the operating system, by numbers. */
export interface OsUser {
  uid: number
  gid: number
}

export interface Outcome {
  code: number
  stdout: string
  stderr: string
}

/** The user this process runs as. */
export function ownUser(): OsUser {
  const [uid, gid] = [process.getuid?.(), process.getgid?.()]
  if (uid === undefined || gid === undefined) {
    throw new PostgresUnavailable(
      'PostgreSQL can be started for you on Linux only: name a server of your own in DATABASE_URL.',
    )
  }
  return { uid, gid }
}

/** The system's user `postgres`, made by Debian's package. */
export async function postgresUser(): Promise<OsUser> {
  const [uid, gid] = await Promise.all(
    ['-u', '-g'].map(async (option) => run(ownUser(), 'id', [option, 'postgres'])),
  )
  if (uid?.code !== 0 || gid?.code !== 0) {
    throw new PostgresUnavailable(
      'PostgreSQL refuses to run as root and there is no user "postgres": install Debian\'s package ' +
        'postgresql, or start Coalhand as an ordinary user.',
    )
  }
  return { uid: Number(uid.stdout), gid: Number(gid.stdout) }
}

/**
 * Runs a program as a user (root may choose one; anyone else only themselves), from `/` or the folder
 * given, with a bare environment: the caller's PG* variables, locale and folder are none of the program's business.
 * The supplementary groups are dropped when the user changes.
 */
export function run(
  user: OsUser,
  program: string,
  args: string[],
  { input = '', cwd = '/' }: { input?: string; cwd?: string } = {},
): Promise<Outcome> {
  const change = user.uid === process.getuid?.() ? {} : { uid: user.uid, gid: user.gid }
  return new Promise((resolve, reject) => {
    const child = spawn(program, args, {
      ...change,
      cwd,
      env: { PATH: '/usr/local/bin:/usr/bin:/bin', LANG: 'C.UTF-8', LC_ALL: 'C.UTF-8', TZ: 'UTC' },
      stdio: ['pipe', 'pipe', 'pipe'],
    })
    const out = { stdout: '', stderr: '' }
    child.stdout.setEncoding('utf8').on('data', (text: string) => (out.stdout += text))
    child.stderr.setEncoding('utf8').on('data', (text: string) => (out.stderr += text))
    // A program that ends without reading its input is judged by its exit code.
    child.stdin.on('error', () => undefined)
    child.stdin.end(input)
    child.on('error', reject)
    child.on('close', (code) => resolve({ code: code ?? 1, ...out }))
  })
}
