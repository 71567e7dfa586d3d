import { execFile } from 'node:child_process'
import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { promisify } from 'node:util'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { Device, NewDevice, NewDeviceSecret, RejectedMessage } from '#shared/contract/device.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { closing, connectDevice } from '../broker/devices.ts'
import { makePiece } from '../harness/house.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let test: TestServer
const told: { site: string; changes: LiveChanges }[] = []
beforeAll(async () => {
  test = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  test.server.services.bus.subscribe((site, changes) => told.push({ site, changes }))
})
afterAll(() => test.stop())

const List = z.object({ items: z.array(Device) })
const list = async () =>
  List.parse((await test.as('crew').get('/api/sites/quarry-road/devices').expect(200)).body).items
const add = (body: object) => test.as('engineer').post('/api/sites/quarry-road/devices').send(body)
const send = ({ username, secret }: { username: string; secret: string }, pack: unknown) =>
  test.api
    .post('/api/readings')
    .auth(username, secret)
    .send(pack as object)

describe('adding a device', () => {
  it('answers with credentials that let it send at once, and tells those who watch', async () => {
    const device = NewDevice.parse((await add({ name: 'Süd-Box  Zwei', channels: 2 }).expect(201)).body)
    expect(device).toMatchObject({
      username: 'quarry-road.sud-box-zwei',
      topic: 'coalhand/quarry-road/sud-box-zwei/readings',
      channels: [{ number: 1 }, { number: 2 }],
    })
    expect(Buffer.from(device.secret, 'base64url')).toHaveLength(32)
    await send(device, [{ n: '2', u: 'Cel', v: 20 }]).expect(200)
    expect(told.at(0)).toMatchObject({ site: 'quarry-road', changes: { devices: [{ id: device.deviceId }] } })
  })

  it('keeps no secret but its hash, and writes down who did it', async () => {
    const device = NewDevice.parse((await add({ name: 'Third box', channels: 1 }).expect(201)).body)
    const rows: unknown = await test.db('device_secrets').where({ device_id: device.deviceId })
    expect(JSON.stringify(rows)).not.toContain(device.secret)
    const audit: unknown = await test.db('audit_entries').where({ subject: `device ${device.deviceId}` })
    expect(audit).toMatchObject([{ action: 'device.add', user_id: test.house.people.engineer.id }])
    expect(JSON.stringify(audit)).not.toContain(device.secret)
  })

  it('finds another place in the topics for a second one of the same name, also for two at once', async () => {
    await Promise.all([1, 2, 3].map((channels) => add({ name: 'Twin', channels }).expect(201)))
    await add({ name: 'Twin', channels: 1 }).expect(201)
    const slugs = (await list()).map(({ slug }) => slug).filter((slug) => slug.startsWith('twin'))
    expect(slugs.sort()).toEqual(['twin', 'twin-2', 'twin-3', 'twin-4'])
  })

  it.each([{ name: ' ', channels: 1 }, { name: 'Box', channels: 0 }, { name: 'Box', channels: 65 }, {}])(
    'refuses %j',
    async (body) => {
      expect((await add(body)).status).toBe(400)
    },
  )
})

describe('the list', () => {
  it('says where each probe is', async () => {
    const { own } = test.house
    const [first = 0, second = 0] = own.device.channelIds
    const pieceId = await makePiece(test.db, test.house, own)
    await test.db('probe_placements').insert([
      { channel_id: first, role: 'meat', piece_id: pieceId, during: '[2026-01-01,)' },
      { channel_id: second, role: 'pit', cooker_id: own.cookers[0]?.id, during: '[2026-01-01,)' },
    ])
    const device = (await list()).find(({ id }) => id === own.device.id)
    expect(device?.channels.map(({ number, unit }) => [number, unit])).toEqual(
      [1, 2, 3, 4, 5, 6].map((number) => [number, 'Cel']),
    )
    expect(device?.channels[0]?.placedIn).toMatchObject({ kind: 'piece', id: pieceId })
    expect(device?.channels[1]?.placedIn).toMatchObject({ kind: 'cooker', name: 'North Offset' })
    expect(device?.channels[2]?.placedIn).toBeNull()
  })
})

describe('what was rejected', () => {
  it('comes in pages, newest first, of this site only, of one device when asked', async () => {
    const { own, foreign } = test.house
    await send(foreign.device, [{ n: '1', u: 'Cel', v: 9999 }]).expect(200)
    for (const v of [1001, 1002, 1003]) await send(own.device, [{ n: '1', u: 'Cel', v }]).expect(200)
    const Page = z.object({ items: z.array(RejectedMessage), nextCursor: z.string().nullable() })
    const page = async (query: string) =>
      Page.parse((await test.as('lead').get(`/api/sites/quarry-road/rejected${query}`).expect(200)).body)
    const first = await page('?limit=2')
    expect(first.items.map(({ detail }) => detail.slice(0, 4))).toEqual(['1003', '1002'])
    const second = await page(`?limit=2&cursor=${first.nextCursor ?? ''}`)
    expect(second.items.map(({ detail }) => detail.slice(0, 4))).toEqual(['1001'])
    expect(second.nextCursor).toBeNull()
    expect((await page(`?deviceId=${own.device.id}`)).items).toHaveLength(3)
    expect((await page(`?deviceId=${foreign.device.id}`)).items).toEqual([])
    await test.as('lead').get('/api/sites/quarry-road/rejected?cursor=x').expect(400)
  })
})

/** Runs a command on the test's house. */
function command(script: string, ...args: string[]) {
  return promisify(execFile)('npm', ['run', '--silent', script, '--', ...args], {
    cwd: fileURLToPath(new URL('../../', import.meta.url)),
    env: { ...process.env, DATABASE_URL: test.databaseUrl, DATA_DIR: dataDir },
  })
}
const dataDir = mkdtempSync(join(tmpdir(), 'coalhand-device-'))
afterAll(() => rmSync(dataDir, { recursive: true }))

describe('device:create', () => {
  const deviceCreate = (...args: string[]) => command('device:create', ...args)

  it('prints one line of JSON, and a server that runs meanwhile knows the device', async () => {
    const { stdout } = await deviceCreate('--site', 'quarry-road', '--name', 'Bench box', '--channels', '3')
    expect(stdout.trim().split('\n')).toHaveLength(1)
    const device = NewDevice.parse(JSON.parse(stdout))
    expect(device.channels.map(({ number }) => number)).toEqual([1, 2, 3])
    expect(device.topic).toBe('coalhand/quarry-road/bench-box/readings')
    const answer = await send(device, [{ n: '3', u: 'Cel', v: 71 }]).expect(200)
    expect(answer.body).toEqual({ stored: 1, duplicates: 0, rejected: [] })
  })

  it('says what is wrong and what there is', async () => {
    await expect(deviceCreate('--site', 'nowhere', '--name', 'Box', '--channels', '3')).rejects.toMatchObject(
      {
        code: 1,
        stdout: '',
        stderr: expect.stringContaining('There are: mill-yard, quarry-road.') as unknown,
      },
    )
    await expect(deviceCreate('--site', 'quarry-road')).rejects.toMatchObject({
      code: 1,
      stderr: expect.stringContaining('npm run --silent device:create --') as unknown,
    })
  })
})

describe('device:secret', () => {
  const deviceSecret = (...args: string[]) => command('device:secret', '--site', 'quarry-road', ...args)

  it('prints one line of JSON with a new secret; the old one is good for the overlap', async () => {
    const device = NewDevice.parse((await add({ name: 'Renewed box', channels: 1 }).expect(201)).body)
    const { stdout } = await deviceSecret('--device', 'renewed-box', '--overlap-hours', '1')
    expect(stdout.trim().split('\n')).toHaveLength(1)
    const renewed = NewDeviceSecret.parse(JSON.parse(stdout))
    expect(renewed).toMatchObject({ deviceId: device.deviceId, username: device.username })
    const endsInMs = Date.parse(renewed.oldSecretEndsAt ?? '') - systemClock.now()
    expect(endsInMs).toBeGreaterThan(55 * 60_000)
    expect(endsInMs).toBeLessThan(61 * 60_000)
    for (const secret of [renewed.secret, device.secret]) {
      await send({ ...device, secret }, [{ n: '1', u: 'Cel', v: 70 }]).expect(200)
    }
  })

  it('without a word about the overlap gives a day; a server lets go of whoever is connected at its end', async () => {
    const device = NewDevice.parse((await add({ name: 'Cut box', channels: 1 }).expect(201)).body)
    const box = await connectDevice(test.mqttPort, device)
    const closed = closing(box)
    const first = NewDeviceSecret.parse(JSON.parse((await deviceSecret('--device', 'cut-box')).stdout))
    const inHours = (Date.parse(first.oldSecretEndsAt ?? '') - systemClock.now()) / 3_600_000
    expect(inHours).toBeGreaterThan(23.9)
    expect(inHours).toBeLessThan(24.1)
    expect(box.connected).toBe(true)
    await deviceSecret('--device', 'cut-box', '--overlap-hours', '0')
    // The command is a process of its own: the server looks every few seconds.
    await closed
  })

  it('says what is wrong and what there is', async () => {
    await expect(deviceSecret('--device', 'nothing')).rejects.toMatchObject({
      code: 1,
      stdout: '',
      stderr: expect.stringMatching(/quarry-road has no device “nothing”. There are: .*north-box/) as unknown,
    })
    for (const hours of ['soon', '', '-1', '10000']) {
      await expect(deviceSecret('--device', 'north-box', `--overlap-hours=${hours}`)).rejects.toMatchObject({
        code: 1,
        stdout: '',
      })
    }
  })
})
