import { expect, test } from 'vitest'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer } from '../harness/server.ts'
import { channelsPerDevice, makeLoadHouse } from '../load/ingest/load-house.ts'
import { connectDevice, publish, record, topicOf } from './devices.ts'

const boxes = 60
const hourMs = 3_600_000
const everyMs = 10_000
/** As many as stay below the largest packet. */
const recordsPerPack = 900

test('live readings are stored in no time while sixty devices hand in an hour of stored ones each', async () => {
  const server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  const stored = await makeLoadHouse(server.db, boxes)
  await server.server.services.deviceBook.warm()
  const begin = systemClock.now() - hourMs - 60_000
  const packs = packsOfAnHour(begin)
  const clients = await Promise.all(stored.map((device) => connectDevice(server.mqttPort, device)))
  const { device } = server.house.own
  const live = await connectDevice(server.mqttPort, device)
  const publishLive = async () => {
    const from = performance.now()
    await publish(live, topicOf(device), [record(1, 90, systemClock.now())])
    return performance.now() - from
  }
  await publishLive()

  const begun = performance.now()
  const drain = { over: false }
  const drained = Promise.all(
    clients.map((client, index) =>
      Promise.all(packs.map((pack) => client.publishAsync(stored[index]?.topic ?? '', pack, { qos: 1 }))),
    ),
  ).then(() => {
    drain.over = true
    return performance.now() - begun
  })
  const delays: number[] = []
  while (!drain.over) delays.push(await publishLive())
  const drainMs = await drained

  const median = delays.sort((a, b) => a - b)[Math.floor(delays.length / 2)] ?? Infinity
  const slowest = delays.at(-1) ?? Infinity
  // Behind the stored ones it would have waited for all of them.
  expect(median).toBeLessThan(drainMs / 10)
  expect(slowest).toBeLessThan(drainMs / 4)
  const all = boxes * channelsPerDevice * (hourMs / everyMs)
  expect(await server.db('readings').count()).toMatchObject([{ count: all + delays.length + 1 }])
  await Promise.all([...clients, live].map((client) => client.endAsync()))
  await server.stop()
})

/** An hour of six channels, in order of time. */
function packsOfAnHour(begin: number): string[] {
  const records: unknown[] = []
  for (let atMs = begin; atMs < begin + hourMs; atMs += everyMs) {
    for (let channel = 1; channel <= channelsPerDevice; channel++) records.push(record(channel, 80, atMs))
  }
  const packs: string[] = []
  for (let from = 0; from < records.length; from += recordsPerPack) {
    packs.push(JSON.stringify(records.slice(from, from + recordsPerPack)))
  }
  return packs
}
