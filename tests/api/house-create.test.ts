import { execFile } from 'node:child_process'
import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { promisify } from 'node:util'
import { compare } from 'bcryptjs'
import type { Knex } from 'knex'
import { afterAll, beforeAll, expect, it } from 'vitest'
import { z } from 'zod'
import { openDatabase } from '../../server/db/database.ts'
import { freshDatabase, type FreshDatabase } from '../harness/postgres.ts'

const root = fileURLToPath(new URL('../../', import.meta.url))
const dataDir = mkdtempSync(join(tmpdir(), 'coalhand-house-'))
let database: FreshDatabase
let db: Knex

beforeAll(async () => {
  database = await freshDatabase()
  db = openDatabase(database.url, { max: 2 })
})
afterAll(async () => {
  await db.destroy()
  await database.drop()
  rmSync(dataDir, { recursive: true })
})

const houseCreate = (...args: string[]) =>
  promisify(execFile)('node', ['--import', 'tsx', 'server/cli/house-create.ts', ...args], {
    cwd: root,
    env: { ...process.env, DATABASE_URL: database.url, DATA_DIR: dataDir },
  })
const wanted = [
  ...['--name', 'Quarry Road', '--site', 'quarry-road', '--time-zone', 'America/Chicago'],
  ...['--owner-email', 'ines@quarryroad.example', '--owner-name', 'Ines Marrow'],
]

it('refuses what cannot be, says what is wanted, and changes nothing', async () => {
  const failed: unknown = await houseCreate(
    '--name',
    'Q',
    '--site',
    'Q R',
    '--time-zone',
    'Mars/Olympus',
  ).catch((error: unknown) => error)
  const { stderr } = z.object({ code: z.literal(1), stderr: z.string() }).parse(failed)
  expect(stderr).toContain('lower-case letters, digits and single hyphens')
  expect(stderr).toContain('Name a zone of the IANA list')
  expect(stderr).toContain('Write the address like name@example.com.')
  expect(stderr).toContain('npm run house:create --')
  expect(await db('sites')).toEqual([])
})

it('makes a site, an owner who can sign in and recipes to start from, once', async () => {
  const { stdout } = await houseCreate(...wanted)
  const [, password = ''] = /shown this once: (\S{16})\n/.exec(stdout) ?? []
  const people = await db('users')
    .join('site_roles', 'user_id', 'users.id')
    .join('sites', 'sites.id', 'site_id')
    .select('email', 'users.name', 'role', 'slug', 'time_zone', 'password_hash')
  expect(people).toMatchObject([
    {
      email: 'ines@quarryroad.example',
      name: 'Ines Marrow',
      role: 'owner',
      slug: 'quarry-road',
      time_zone: 'America/Chicago',
    },
  ])
  const [{ password_hash: hash }] = z.tuple([z.object({ password_hash: z.string() })]).parse(people)
  expect(await compare(password, hash)).toBe(true)
  expect((await db('recipes')).length).toBeGreaterThan(0)

  await expect(houseCreate(...wanted)).rejects.toMatchObject({
    code: 1,
    stderr: expect.stringContaining('This house has sites or people already.') as unknown,
  })
  expect(await db('sites')).toHaveLength(1)
})
