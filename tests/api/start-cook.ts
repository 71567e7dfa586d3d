import { randomUUID } from 'node:crypto'
import { expect } from 'vitest'
import { Piece } from '#shared/contract/piece.ts'
import { systemClock } from '#shared/domain/clock.ts'
import type { TestServer } from '../harness/server.ts'

const hourMs = 3_600_000

/**
 * Puts a piece on the first cooker, an hour ago.
 * @param channelNumber the channel of its probe, whose readings of the hour are then sent; null for none
 * @returns its number
 */
export async function startCook(
  server: TestServer,
  label: string,
  channelNumber: number | null = 2,
): Promise<number> {
  const { own, recipes } = server.house
  if (channelNumber !== null) {
    const now = systemClock.now()
    const records = Array.from({ length: 60 }, (_, minute) => ({
      n: String(channelNumber),
      u: 'Cel',
      v: 5 + minute / 2,
      t: (now - hourMs) / 1000 + minute * 60,
    }))
    const { username, secret } = own.device
    await server.api.post('/api/readings').auth(username, secret).send(records).expect(200)
  }
  const answer = await server
    .as('lead')
    .post(`/api/sites/${own.slug}/pieces`)
    .send({
      eventId: randomUUID(),
      label,
      recipeId: recipes[0]?.id,
      cookerId: own.cookers[0]?.id,
      rawKg: 6.2,
      onAt: new Date(systemClock.now() - hourMs).toISOString(),
      ...(channelNumber === null ? {} : { channelId: own.device.channelIds[channelNumber - 1] }),
    })
  expect(answer.status, answer.text).toBe(201)
  return Piece.parse(answer.body).id
}
