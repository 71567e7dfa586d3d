import { randomUUID } from 'node:crypto'
import { fileURLToPath } from 'node:url'
import type { MqttClient } from 'mqtt'
import { Piece } from '#shared/contract/piece.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { connectDevice, publish, record, topicOf } from '../broker/devices.ts'
import { startTestServer, type TestServer } from './server.ts'

const minute = 60_000
const hour = 60 * minute

export interface Night extends TestServer {
  /** The piece that is on, and its site's pages. */
  pieceId: number
  /** Sends pit and core, °C, as the device does, and waits for the acknowledgement. */
  report(pitC: number, coreC: number): Promise<void>
}

/**
 * A server with the built client and a running night: one House Brisket, five hours on North Offset, with its pit on
 * channel 1 and its core on channel 2, a reading a minute so far.
 */
export async function startNight(): Promise<Night> {
  const server = await startTestServer({
    mqtt: { host: '127.0.0.1', port: 0 },
    jobs: {},
    clientDir: fileURLToPath(new URL('../../dist/client', import.meta.url)),
  })
  const { own, recipes } = server.house
  const [pitChannel, coreChannel] = own.device.channelIds
  const [cooker] = own.cookers
  const [recipe] = recipes
  const lead = server.as('lead')
  await lead.put(`/api/cookers/${cooker?.id}/probe`).send({ channelId: pitChannel }).expect(200)
  const now = systemClock.now()
  const started = await lead
    .post(`/api/sites/${own.slug}/pieces`)
    .send({
      eventId: randomUUID(),
      label: 'N1',
      recipeId: recipe?.id,
      cookerId: cooker?.id,
      rawKg: 6.2,
      onAt: new Date(now - 5 * hour).toISOString(),
      channelId: coreChannel,
    })
    .expect(201)
  const device = await connectDevice(server.mqttPort, own.device)
  await sendHistory(device, own.device.slug, now)
  return {
    ...server,
    pieceId: Piece.parse(started.body).id,
    report: (pitC, coreC) => publish(device, topicOf(own.device), [record(1, pitC), record(2, coreC)]),
    stop: async () => {
      await device.endAsync()
      await server.stop()
    },
  }
}

/** Five hours of a quick rise that bends into the stall, a pack an hour. */
async function sendHistory(device: MqttClient, slug: string, now: number): Promise<void> {
  for (let from = now - 5 * hour; from < now; from += hour) {
    const pack = Array.from({ length: 60 }, (_, index) => from + index * minute).flatMap((at) => [
      record(1, 121 + 2 * Math.sin(at / (20 * minute)), at),
      record(2, coreAfter((at - now) / hour + 5), at),
    ])
    await publish(device, topicOf({ slug }), pack)
  }
}

/** The core after so many hours, °C: quick at first, nearly still at 67. */
function coreAfter(hours: number): number {
  return 67 - 63 * Math.exp(-hours / 1.4)
}
