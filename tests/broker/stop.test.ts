import { expect, test } from 'vitest'
import { systemClock } from '#shared/domain/clock.ts'
import { startTestServer } from '../harness/server.ts'
import { closing, connectDevice, eventually, record, topicOf } from './devices.ts'

test('a server that is stopped stores and acknowledges what it has taken, and takes nothing more', async () => {
  const server = await startTestServer({ mqtt: { host: '127.0.0.1', port: 0 } })
  const { device } = server.house.own
  const client = await connectDevice(server.mqttPort, device)
  const closed = closing(client)
  const from = systemClock.now() - 3_000_000
  let acknowledged = 0
  let next = 0
  const sending = setInterval(() => {
    for (let count = 0; count < 20; count++) {
      const atMs = from + next++ * 100
      client.publish(topicOf(device), JSON.stringify([record(1, 60, atMs)]), { qos: 1 }, (error) => {
        if (!error) acknowledged++
      })
    }
  }, 2)
  await eventually(
    () => acknowledged,
    (count) => count > 500,
  )
  await server.server.stop()
  clearInterval(sending)
  await closed

  const rows = Number((await server.db('readings').count())[0]?.['count'])
  // Whatever is in the database was told so: a device does not send twice what was taken before the end.
  expect(rows).toBe(acknowledged)
  expect(rows).toBeGreaterThan(500)
  expect(next).toBeGreaterThan(rows)
  await client.endAsync(true)
  await server.stop()
})
