import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import type { MqttClient } from 'mqtt'
import { expect, test } from 'vitest'
import { z } from 'zod'
import { systemClock } from '#shared/domain/clock.ts'
import { openDatabase } from '../../server/db/database.ts'
import { makeHouse } from '../harness/house.ts'
import { freshDatabase } from '../harness/postgres.ts'
import { connectDevice, eventually, record, topicOf } from './devices.ts'
import { freePort, startServerProcess } from './server-process.ts'

const readings = 20_000
const clients = 4

test('20 000 readings while the server is killed three times: exactly 20 000 rows, none acknowledged in vain', async () => {
  const database = await freshDatabase()
  const db = openDatabase(database.url, { max: 2 })
  const { device } = (await makeHouse(db)).own
  const port = await freePort()
  const dataDir = mkdtempSync(join(tmpdir(), 'coalhand-kill-'))
  const start = () => startServerProcess({ databaseUrl: database.url, mqttPort: port, dataDir })
  let server = await start()
  const boxes = await Promise.all(
    Array.from({ length: clients }, (_, index) =>
      connectDevice(port, device, { clientId: `box-${index}`, clean: false, reconnectPeriod: 100 }),
    ),
  )
  let lost = 0
  for (const box of boxes) {
    box.on('error', () => undefined)
    box.on('close', () => lost++)
  }

  const from = systemClock.now() - 3_600_000
  const acknowledged = new Set<number>()
  const topic = topicOf(device)
  const all = Promise.all(
    boxes.map((box, index) =>
      sendSteadily(
        box,
        index,
        (number) => acknowledged.add(number),
        topic,
        (number) => ({
          channel: 1 + (number % 6),
          value: number / 100,
          atMs: from + Math.floor(number / 6) * 1000,
        }),
      ),
    ),
  )

  for (const mark of [3_000, 9_000, 15_000]) {
    await eventually(
      () => acknowledged.size,
      (count) => count >= mark,
      60_000,
    )
    await server.kill()
    expect(acknowledged.size).toBeLessThan(readings)
    // What was acknowledged before the kill is in the database, whatever came of the rest.
    const claimed = acknowledged.size
    expect(Number((await db('readings').count())[0]?.['count'])).toBeGreaterThanOrEqual(claimed)
    server = await start()
  }
  await all
  expect(lost).toBeGreaterThanOrEqual(3 * clients)

  expect(await db('readings').count()).toMatchObject([{ count: readings }])
  const sums: unknown = await db('readings').sum('value as sum')
  // The sum of 0, 0.01 … 199.99.
  const [{ sum }] = z.tuple([z.object({ sum: z.number() })]).parse(sums)
  expect(sum).toBeCloseTo(((readings - 1) * readings) / 200, 3)
  expect(await db('readings_1m').sum('count as sum')).toMatchObject([{ sum: readings }])
  expect(await db('rejected_messages').count()).toMatchObject([{ count: 0 }])

  await Promise.all(boxes.map((box) => box.endAsync()))
  await server.kill()
  await db.destroy()
  await database.drop()
  rmSync(dataDir, { recursive: true })
})

/** Sends every fourth number, a hundred on the way at a time, so that a kill always meets some of them. */
async function sendSteadily(
  box: MqttClient,
  first: number,
  onAcknowledged: (number: number) => void,
  topic: string,
  readingOf: (number: number) => { channel: number; value: number; atMs: number },
): Promise<void> {
  let next = first
  const sendNext = async (): Promise<void> => {
    while (next < readings) {
      const number = next
      next += clients
      const { channel, value, atMs } = readingOf(number)
      await box.publishAsync(topic, JSON.stringify([record(channel, value, atMs)]), { qos: 1 })
      onAcknowledged(number)
    }
  }
  await Promise.all(Array.from({ length: 100 }, sendNext))
}
