import { spawn, type ChildProcess } from 'node:child_process'
import { once } from 'node:events'
import { existsSync, readFileSync, statSync } from 'node:fs'
import { chmod, chown, cp, mkdir, mkdtemp, readFile, realpath, rename, rm, writeFile } from 'node:fs/promises'
import { createServer } from 'node:net'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import pg from 'pg'
import { afterEach, beforeEach, describe, expect, it } from 'vitest'
import { startPostgres, type RunningPostgres } from '../../server/setup/postgres.ts'

const holder = fileURLToPath(new URL('./hold-postgres.ts', import.meta.url))

let base: string
let dataDir: string
let lines: string[]
let running: RunningPostgres[]
let holders: ChildProcess[]

beforeEach(async () => {
  base = await realpath(await mkdtemp(join(tmpdir(), 'coalhand-setup-')))
  await chmod(base, 0o711)
  dataDir = join(base, 'data')
  lines = []
  running = []
  holders = []
})

afterEach(async () => {
  for (const child of holders) child.kill('SIGKILL')
  for (const one of running) await one.stop()
  // Joins what a killed holder left, so that nothing outlives the test.
  if (existsSync(join(dataDir, 'postgres/postmaster.pid'))) await (await start()).stop()
  await rm(base, { recursive: true, force: true })
})

async function start(): Promise<RunningPostgres> {
  const one = await startPostgres({
    dataDir,
    log: (line) => lines.push(line),
    fallbackRoot: join(base, 'fallback'),
  })
  running.push(one)
  return one
}

/** Another process that starts PostgreSQL and holds it; resolves once it has it. */
async function startElsewhere(): Promise<ChildProcess> {
  const child = spawn(process.execPath, ['--import', 'tsx', holder, dataDir], {
    stdio: ['ignore', 'pipe', 'inherit'],
  })
  holders.push(child)
  await once(createInterface({ input: child.stdout }), 'line')
  return child
}

async function query(url: string, text: string): Promise<pg.QueryResultRow[]> {
  const client = new pg.Client({ connectionString: url })
  await client.connect()
  try {
    return (await client.query<pg.QueryResultRow>(text)).rows
  } finally {
    await client.end()
  }
}

async function postmaster(): Promise<number> {
  return Number((await readFile(join(dataDir, 'postgres/postmaster.pid'), 'utf8')).split('\n')[0])
}

/** A process that ended but was not yet taken note of by its parent (a zombie, Z) is not alive. */
function isAlive(pid: number): boolean {
  const stat = existsSync(`/proc/${pid}`) ? readFileSync(`/proc/${pid}/stat`, 'utf8') : ''
  return /\) [^ZX] /.test(stat)
}

const modeOf = (file: string) => statSync(file).mode & 0o777
const portOf = (one: RunningPostgres) => new URL(one.url).port

describe('startPostgres', () => {
  it('makes a database on loopback, owned by an unprivileged user, with its password kept to itself', async () => {
    const one = await start()
    expect(await query(one.url, 'select current_database(), current_user')).toEqual([
      { current_database: 'coalhand', current_user: 'coalhand' },
    ])
    expect(await query(one.url, "select rolsuper from pg_roles where rolname = 'coalhand'")).toEqual([
      { rolsuper: false },
    ])
    const settings = "select name, setting from pg_settings where name in ('fsync', 'listen_addresses')"
    expect(await query(one.url, `${settings} order by name`)).toEqual([
      { name: 'fsync', setting: 'on' },
      { name: 'listen_addresses', setting: '127.0.0.1' },
    ])
    expect(modeOf(join(dataDir, 'postgres.password'))).toBe(0o600)
    expect(modeOf(join(dataDir, 'postgres.json'))).toBe(0o600)
    expect(modeOf(one.directory)).toBe(0o700)
    expect(statSync(`/proc/${await postmaster()}`).uid).not.toBe(0)
    const wrong = one.url.replace(/:[^:@]+@/, ':wrong@')
    await expect(query(wrong, 'select 1')).rejects.toThrow('password')
    await expect(query(one.url.replace('coalhand:', 'postgres:'), 'select 1')).rejects.toThrow('password')
  })

  it('keeps data and port from one start to the next', async () => {
    const first = await start()
    await query(first.url, 'create table kept (n int)')
    await first.stop()
    expect(existsSync(join(dataDir, 'postgres/postmaster.pid'))).toBe(false)
    const second = await start()
    expect(second.url).toBe(first.url)
    expect(await query(second.url, 'select * from kept')).toEqual([])
  })

  it('moves to another port, and stays there, when its own is taken', async () => {
    const first = await start()
    await first.stop()
    const squatter = createServer().listen(Number(portOf(first)), '127.0.0.1')
    await once(squatter, 'listening')
    const second = await start()
    expect(portOf(second)).not.toBe(portOf(first))
    expect(lines.join('\n')).toContain(`Port ${portOf(first)} is taken`)
    await query(second.url, 'select 1')
    await second.stop()
    squatter.close()
    await once(squatter, 'close')
    expect(portOf(await start())).toBe(portOf(second))
  })

  it('recovers committed data after kill -9 of PostgreSQL', async () => {
    const first = await start()
    await query(first.url, 'create table kept as select generate_series(1, 1000) as n')
    process.kill(await postmaster(), 'SIGKILL')
    const second = await start()
    expect(await query(second.url, 'select count(*)::int as n from kept')).toEqual([{ n: 1000 }])
    expect(lines).toContain('PostgreSQL was not stopped in order last time; it recovers by itself')
  })

  it('joins the server that a killed process left, and stops it in the end', async () => {
    const child = await startElsewhere()
    const pid = await postmaster()
    child.kill('SIGKILL')
    await once(child, 'exit')
    const one = await start()
    expect(await postmaster()).toBe(pid)
    await query(one.url, 'select 1')
    await one.stop()
    await expect.poll(() => isAlive(pid)).toBe(false)
  })

  it('recovers when both it and the process that held it are killed', async () => {
    const child = await startElsewhere()
    process.kill(await postmaster(), 'SIGKILL')
    child.kill('SIGKILL')
    await once(child, 'exit')
    await query((await start()).url, 'select 1')
  })

  it('serves several processes at once, and goes when the last has gone', async () => {
    const [child, one] = await Promise.all([startElsewhere(), start()])
    const pid = await postmaster()
    await one.stop()
    expect(isAlive(pid)).toBe(true)
    expect(lines).toContain('PostgreSQL goes on for another process that uses it')
    child.kill('SIGTERM')
    await once(child, 'exit')
    await expect.poll(() => isAlive(pid)).toBe(false)
  })

  it('starts although the number in a left-over pid file belongs to something else now', async () => {
    const first = await start()
    await first.stop()
    const { uid, gid } = statSync(first.directory)
    const bystander = spawn('sleep', ['300'], { cwd: '/', uid, gid })
    holders.push(bystander)
    await writeFile(
      join(first.directory, 'postmaster.pid'),
      `${bystander.pid}\n${first.directory}\n1\n15432\n`,
    )
    await query((await start()).url, 'select 1')
    expect(bystander.exitCode).toBeNull()
    expect(bystander.signalCode).toBeNull()
  })

  it('leaves its files to the owner of the data folder, whoever starts it', async () => {
    const { uid, gid } = process.getuid?.() === 0 ? { uid: 12_345, gid: 12_345 } : statSync(base)
    await mkdir(dataDir, { mode: 0o711 })
    await chown(dataDir, uid, gid)
    await start()
    for (const name of ['postgres.json', 'postgres.password']) {
      expect(statSync(join(dataDir, name)).uid).toBe(uid)
      expect(modeOf(join(dataDir, name))).toBe(0o600)
    }
  })

  it('begins again when the first start was broken off half-way', async () => {
    await mkdir(join(dataDir, 'postgres.new/base'), { recursive: true })
    await writeFile(join(dataDir, 'postgres.new/PG_VERSION'), '15\n')
    await query((await start()).url, 'select 1')
    expect(existsSync(join(dataDir, 'postgres.new'))).toBe(false)
  })

  it('gives the role a new password when the file with it is lost', async () => {
    const first = await start()
    await query(first.url, 'create table kept (n int)')
    await first.stop()
    await rm(join(dataDir, 'postgres.password'))
    const second = await start()
    expect(second.url).not.toBe(first.url)
    expect(await query(second.url, 'select * from kept')).toEqual([])
  })

  it('does the same when the server was left running', async () => {
    const child = await startElsewhere()
    child.kill('SIGKILL')
    await once(child, 'exit')
    await rm(join(dataDir, 'postgres.password'))
    await query((await start()).url, 'select 1')
  })

  it('says in one sentence that something else is in its place', async () => {
    await mkdir(join(dataDir, 'postgres'), { recursive: true })
    await writeFile(join(dataDir, 'postgres/notes.txt'), 'mine')
    await expect(start()).rejects.toThrow('holds something that is no PostgreSQL data directory')
    expect(await readFile(join(dataDir, 'postgres/notes.txt'), 'utf8')).toBe('mine')
  })

  it('works in a folder with a long name, spaces and quotes', async () => {
    dataDir = join(base, `it's a "$5" \`smoke\` house`, 'x'.repeat(120))
    await mkdir(join(base, `it's a "$5" \`smoke\` house`))
    await query((await start()).url, 'select 1')
  })

  it('refuses parameters that a shell could take for more', async () => {
    const options = { dataDir, log: () => undefined, settings: { work_mem: '4MB; touch x' } }
    await expect(startPostgres(options)).rejects.toThrow('plain PostgreSQL parameter')
  })
})

describe('a data folder that PostgreSQL may not enter', () => {
  const isRoot = process.getuid?.() === 0

  it('is told in one sentence, and as root the data go elsewhere and stay there', async () => {
    const closed = join(base, 'closed')
    await mkdir(closed, { mode: 0o700 })
    if (!isRoot) {
      await chmod(closed, 0o500)
      dataDir = join(closed, 'data')
      await expect(start()).rejects.toThrow(/data folder .* cannot be made \(EACCES\)/)
      return
    }
    dataDir = join(closed, 'data')
    const first = await start()
    expect(first.directory.startsWith(join(base, 'fallback'))).toBe(true)
    expect(lines.join('\n')).toContain(`may not enter ${dataDir}; its data go to ${first.directory}`)
    await query(first.url, 'create table kept (n int)')
    await first.stop()
    // Opening the folder later must not begin an empty database beside the full one.
    await chmod(closed, 0o755)
    const second = await start()
    expect(await query(second.url, 'select * from kept')).toEqual([])
    await second.stop()

    await rename(closed, join(base, 'moved'))
    dataDir = join(base, 'moved/data')
    await expect(start()).rejects.toThrow('was moved or copied while its database stayed')
  })

  it('takes its database along when it is copied', async () => {
    const first = await start()
    await query(first.url, 'create table kept (n int)')
    await first.stop()
    const original = dataDir
    dataDir = join(base, 'copy')
    await cp(original, dataDir, { recursive: true, preserveTimestamps: true })
    const { uid, gid } = statSync(first.directory)
    const giveBack = spawn('chown', ['-R', `${uid}:${gid}`, join(dataDir, 'postgres')])
    await once(giveBack, 'exit')
    const second = await start()
    expect(second.directory).toBe(join(dataDir, 'postgres'))
    expect(await query(second.url, 'select * from kept')).toEqual([])
  })
})
