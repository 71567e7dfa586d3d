import { createHmac } from 'node:crypto'
import { compare, hash } from 'bcryptjs'
import type { Knex } from 'knex'
import { z } from 'zod'
import type { Clock } from '#shared/domain/clock.ts'
import { demoUsername, seedDemoHouse } from '../../seeds/demo-house.ts'
import { demoPeople, demoSites } from '../../simulators/demo/house.ts'
import { pastCooks } from '../../simulators/demo/past-cooks.ts'
import { tonight } from '../../simulators/demo/tonight.ts'
import { ensurePartitions } from '../db/partitions.ts'
import { recordAudit } from '../features/audit/service.ts'
import { hashOfSecret } from '../features/devices/secret.ts'
import { seedNights } from './seed-nights.ts'

export interface DemoSeedOptions {
  db: Knex
  clock: Clock
  /** The same seed at the same moment gives the same house. */
  seed: number
  /** Of every demo account. */
  password: string
  /** From which the devices' secrets are made, so that they need not be kept anywhere else. */
  deviceKey: string
  log: (line: string) => void
  /** bcrypt's cost. */
  passwordCost?: number
  /** How many finished cooks lie behind the house. */
  pastCount?: number
}

/** A house that has no site yet is `empty`; one that was filled by `seedDemo` is `demo`; any other is somebody's own. */
export type HouseState = 'empty' | 'demo' | 'own'

/** What a database holds, before anything is put into it. It must have the newest schema. */
export async function houseState(db: Knex): Promise<HouseState> {
  if (await seededAt(db)) return 'demo'
  const site: unknown = await db('sites').first('id')
  return site === undefined ? 'empty' : 'own'
}

/** When the demo house was put in, and with which seed; undefined when it was not. */
export async function seededAt(db: Knex): Promise<{ at: number; seed: number } | undefined> {
  const row: unknown = await db('audit_entries')
    .where({ action: seedAction })
    .orderBy('id')
    .first('at', 'data')
  const found = z
    .object({ at: z.date(), data: z.object({ seed: z.number() }) })
    .optional()
    .parse(row)
  return found && { at: found.at.getTime(), seed: found.data.seed }
}

/**
 * Fills an empty database with the demo house: people, sites, cookers, devices, recipes, finished cooks of the past
 * weeks and tonight's pieces as they stand. All of it in one transaction; on a database that has it already only the
 * accounts' password and the devices' secrets are brought up to date.
 * @returns whether it was put in now
 */
export async function seedDemo(options: DemoSeedOptions): Promise<boolean> {
  const { db, clock, seed, password, deviceKey, log, passwordCost = 10, pastCount = 40 } = options
  if (await seededAt(db)) {
    await renewSecrets(options)
    return false
  }
  const now = clock.now()
  log('Demo house: cooking tonight’s pieces and those of the past weeks')
  const running = tonight({ seed, now })
  const past = pastCooks({ seed, before: running.startsMs, count: pastCount })
  const firstMs = Math.min(running.startsMs, ...past.pieces.map((piece) => piece.onMs))
  await ensurePartitions(db, firstMs - dayMs, now)
  const passwordHash = await hash(password, passwordCost)
  log(
    `Demo house: storing ${past.pieces.length} finished cooks and ${running.pieces.length} pieces of tonight`,
  )
  await db.transaction(async (trx) => {
    const ids = await seedDemoHouse(trx, {
      since: firstMs - 7 * dayMs,
      passwordHash,
      secretHash: (username) => hashOfSecret(deviceSecret(deviceKey, username)),
    })
    await seedNights(trx, ids, past)
    await seedNights(trx, ids, running)
    await recordAudit(trx, { at: now, action: seedAction, subject: 'house', data: { seed } })
  })
  // The planner knows nothing of rows that came all at once.
  await db.raw('analyze')
  return true
}

/** The secret of a demo device: 256 bits that depend on this installation's key and the device's user name. */
export function deviceSecret(deviceKey: string, username: string): string {
  return createHmac('sha256', deviceKey).update(`demo device ${username}`).digest('base64url')
}

const seedAction = 'demo.seed'
const dayMs = 24 * 3_600_000

/** The database may be older than the secrets beside it: a data folder that was lost, say. */
async function renewSecrets({
  db,
  clock,
  password,
  deviceKey,
  passwordCost = 10,
}: DemoSeedOptions): Promise<void> {
  const emails = demoPeople.map((person) => person.email)
  const account: unknown = await db('users').whereIn('email', emails).first('password_hash')
  const known = z.object({ password_hash: z.string() }).optional().parse(account)
  if (known && !(await compare(password, known.password_hash))) {
    await db('users')
      .whereIn('email', emails)
      .update({ password_hash: await hash(password, passwordCost) })
  }
  const usernames = demoSites.flatMap((site) => site.devices.map((device) => demoUsername(site, device)))
  const devices = z
    .array(z.object({ id: z.number(), username: z.string() }))
    .parse(await db('devices').whereIn('username', usernames).select('id', 'username'))
  for (const { id, username } of devices) {
    const row = { device_id: id, secret_hash: hashOfSecret(deviceSecret(deviceKey, username)) }
    const held: unknown = await db('device_secrets').where(row).first('id')
    if (held === undefined) await db('device_secrets').insert({ ...row, created_at: new Date(clock.now()) })
  }
}
