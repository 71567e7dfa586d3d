// What pages cost that watch a site, and how soon they see a reading: `npm run bench:live -- --seconds 30 --pages 200`.
// Server, devices and pages are three processes; the WebSocket library alone, sending as much, is the baseline.
import { spawn, type ChildProcess } from 'node:child_process'
import { once } from 'node:events'
import { createInterface } from 'node:readline'
import { parseArgs } from 'node:util'
import { connectAsync, type MqttClient } from 'mqtt'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { openDatabase } from '../../server/db/database.ts'
import { cpuSeconds } from './cpu-time.ts'
import { channelsPerDevice, makeLoadHouse } from './ingest/load-house.ts'
import type { LoadDevice } from './ingest/raw-publisher.ts'
import { startScratchPostgres } from './scratch-postgres.ts'

/** Of a core for all pages together, and from publishing to the socket. */
const floors = { share: 0.05, p99Ms: 150 }
const site = 'load-yard'
const deviceCount = 17
const warmUpMs = 3000

const { values } = parseArgs({
  options: { seconds: { type: 'string', default: '30' }, pages: { type: 'string', default: '200' } },
})
const measureMs = Number(values.seconds) * 1000
const pages = Number(values.pages)

const Hub = z.object({ httpPort: z.int(), mqttPort: z.int().optional() })
const Seen = z.object({
  bytes: z.number(),
  frames: z.number(),
  readings: z.number(),
  medianMs: z.number().nullable(),
  p99Ms: z.number().nullable(),
})

/** What the processes print, line by line. */
const outputs = new WeakMap<ChildProcess, AsyncIterator<string>>()
const postgres = await startScratchPostgres()
try {
  process.exitCode = (await measure()) ? 0 : 1
} finally {
  await postgres.remove()
}

async function measure(): Promise<boolean> {
  const db = openDatabase(postgres.url, { max: 2 })
  const devices = await makeLoadHouse(db, deviceCount)
  const ids = z.tuple([z.object({ id: z.int() })])
  const [{ id: siteId }] = ids.parse(await db('sites').where({ slug: site }).select('id'))
  const [{ id: userId }] = ids.parse(
    await db('users')
      .insert({
        email: 'page@load.example',
        name: 'Page',
        password_hash: '',
        created_at: '2020-01-01T00:00:00Z',
      })
      .returning('id'),
  )
  await db('site_roles').insert({ user_id: userId, site_id: siteId, role: 'crew' })
  await db.destroy()

  const server = run('hub-process.ts', { databaseUrl: postgres.url, userId, siteId })
  const hub = Hub.parse(JSON.parse(await nextLine(server)))
  const stopDevices = await startDevices(devices, hub.mqttPort ?? 0)
  // Both with a watcher in the room, so that what one page costs at any rate is no part of the difference.
  const alone = await watched(server, hub.httpPort, 1, await ticketsFor(server, 1))
  const full = await watched(server, hub.httpPort, pages, await ticketsFor(server, pages))
  await stopDevices()
  await end(server)

  const framesPerSecond = full.seen.frames / pages / (measureMs / 1000)
  const bytesPerFrame = full.seen.bytes / full.seen.frames
  const bareServer = run('bare-hub-process.ts', { bytes: bytesPerFrame, everyMs: 1000 / framesPerSecond })
  const bareHub = Hub.parse(JSON.parse(await nextLine(bareServer)))
  const bare = await watched(bareServer, bareHub.httpPort, pages, null)
  await end(bareServer)

  const share = full.share - alone.share
  const p99Ms = full.seen.p99Ms ?? Infinity
  const percent = (value: number) => `${(value * 100).toFixed(1)} %`
  console.log(`Server with one page                 ${percent(alone.share)} of a core`)
  console.log(`Server with ${pages} pages                ${percent(full.share)} of a core`)
  console.log(
    `The pages’ part                      ${percent(share)} of a core, ${(share / bare.share).toFixed(2)} of the library alone (${percent(bare.share)})`,
  )
  console.log(
    `To a page                            ${framesPerSecond.toFixed(1)} frames/s, ${(bytesPerFrame * framesPerSecond).toFixed(0)} bytes/s`,
  )
  console.log(
    `Publish to socket                    ${full.seen.medianMs} ms median, ${full.seen.p99Ms} ms 99th (${full.seen.readings} readings)`,
  )
  const missed = [
    ...(share < floors.share ? [] : [`under ${percent(floors.share)} of a core`]),
    ...(p99Ms < floors.p99Ms ? [] : [`99th percentile under ${floors.p99Ms} ms`]),
  ]
  for (const floor of missed) console.log(`Floor missed: ${floor}`)
  return missed.length === 0
}

async function ticketsFor(server: ChildProcess, count: number): Promise<string[]> {
  server.stdin?.write(`${count}\n`)
  return z.array(z.string()).parse(JSON.parse(await nextLine(server)))
}

/** Lets pages watch, and counts what the server's process has had of a core meanwhile. */
async function watched(server: ChildProcess, port: number, count: number, tickets: string[] | null) {
  const watchers = run('pages-process.ts', { port, pages: count, tickets, site, warmUpMs, measureMs })
  await nextLine(watchers)
  await pause(warmUpMs)
  const [before, begun] = [cpuSeconds(server.pid ?? 0), systemClock.now()]
  const line = nextLine(watchers)
  await pause(measureMs - 200)
  const share = (cpuSeconds(server.pid ?? 0) - before) / ((systemClock.now() - begun) / 1000)
  const seen = Seen.parse(JSON.parse(await line))
  await end(watchers)
  return { share, seen }
}

/** Each box sends all its channels once a second, at a moment of its own. @returns what ends that */
async function startDevices(devices: readonly LoadDevice[], port: number): Promise<() => Promise<void>> {
  const clients = await Promise.all(
    devices.map(({ username, secret }) =>
      connectAsync({
        host: '127.0.0.1',
        port,
        username,
        password: secret,
        clientId: username,
        reconnectPeriod: 0,
      }),
    ),
  )
  const timers: NodeJS.Timeout[] = []
  for (const [index, device] of devices.entries()) {
    const client = clients[index]
    if (!client) continue
    const first = setTimeout(
      () => {
        timers.push(setInterval(() => send(client, device.topic), 1000))
      },
      (index * 1000) / devices.length,
    )
    timers.push(first)
  }
  return async () => {
    for (const timer of timers) clearInterval(timer)
    await Promise.all(clients.map((client) => client.endAsync()))
  }
}

function send(client: MqttClient, topic: string): void {
  const now = systemClock.now()
  const pack = Array.from({ length: channelsPerDevice }, (_, index) => ({
    n: String(index + 1),
    u: 'Cel',
    t: now / 1000,
    v: 100 + (now % 1000) / 10,
  }))
  client.publish(topic, JSON.stringify(pack), { qos: 1 })
}

function run(file: string, options: unknown): ChildProcess {
  const child = spawn(
    process.execPath,
    ['--import', 'tsx', `tests/load/live/${file}`, JSON.stringify(options)],
    { stdio: ['pipe', 'pipe', 'inherit'] },
  )
  outputs.set(child, createInterface({ input: child.stdout })[Symbol.asyncIterator]())
  return child
}

async function nextLine(child: ChildProcess): Promise<string> {
  const next = await outputs.get(child)?.next()
  if (!next || next.done === true) throw new Error('A process of the benchmark ended early.')
  return next.value
}

async function end(child: ChildProcess): Promise<void> {
  if (child.exitCode !== null || child.signalCode !== null) return
  const left = once(child, 'exit')
  child.kill('SIGTERM')
  await left
}

function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms))
}
