import type { Knex } from 'knex'
import { z } from 'zod'
import type { EventFact } from '#shared/contract/event.ts'
import { businessDay } from '#shared/domain/business-day.ts'
import type { DemoHouseIds } from '../../seeds/demo-house.ts'
import type { DemoCookerEvent, DemoNights, DemoPiece } from '../../simulators/demo/demo-night.ts'
import { demoSites, findRecipe, findSite } from '../../simulators/demo/house.ts'
import type { PieceFact } from '../../simulators/story.ts'
import { eventsRepository } from '../features/events/index.ts'
import { addPiece, applyEvents } from '../features/pieces/service.ts'
import { storeReadings, type ReadingRow } from '../ingest/store-readings.ts'
import { namedUuid } from './named-uuid.ts'

/** Puts nights of the demo house into the database the way they would have got there: through the log. */
export async function seedNights(trx: Knex, ids: DemoHouseIds, nights: DemoNights): Promise<void> {
  const services = await seedServices(trx, ids, nights.services)
  await seedCookerEvents(trx, ids, nights.cookerEvents)
  for (const piece of nights.pieces) await seedPiece(trx, ids, services, piece)
  await seedReadings(trx, ids, nights.series)
}

/** @returns their numbers by `site/moment` */
async function seedServices(
  trx: Knex,
  ids: DemoHouseIds,
  services: DemoNights['services'],
): Promise<Map<string, number>> {
  const made = new Map<string, number>()
  for (const { site, servesMs, portions } of services) {
    const rows: unknown = await trx('services')
      .insert({
        site_id: idOf(ids.sites, site),
        date: businessDay(servesMs, findSite(site).timeZone),
        serves_at: new Date(servesMs),
        portions,
      })
      .returning('id')
    made.set(`${site}/${servesMs}`, z.tuple([z.object({ id: z.number() })]).parse(rows)[0].id)
  }
  return made
}

async function seedPiece(
  trx: Knex,
  ids: DemoHouseIds,
  services: ReadonlyMap<string, number>,
  piece: DemoPiece,
): Promise<void> {
  const recipe = findRecipe(piece.recipe)
  if (!recipe) throw new RangeError(`The demo house has no recipe ${piece.recipe}.`)
  const siteId = idOf(ids.sites, piece.site)
  const made = await addPiece(trx, {
    siteId,
    label: piece.label,
    serviceId: services.get(`${piece.site}/${piece.servesMs}`) ?? null,
    recipeId: idOf(ids.recipes, piece.recipe),
    cured: piece.cured,
    rawKg: piece.rawKg,
    wrapAtC: recipe.wrapAtC,
    wrapMethod: recipe.wrapMethod,
    pullAtC: recipe.pullAtC,
    createdAt: piece.onMs,
  })
  const name = `${piece.site}/${piece.label}/${piece.onMs}`
  const events = piece.events.map((event, index) => ({
    id: namedUuid(`${name}/${index}`),
    siteId,
    subject: { pieceId: made.id },
    happenedAt: event.atMs,
    recordedAt: event.recordedMs,
    userId: idOf(ids.users, event.by),
    fact: factWithIds(ids, piece.site, event.fact),
    note: event.note ?? null,
    correctsId: null,
  }))
  await eventsRepository(trx).add(events)
  await applyEvents(trx, siteId, made, events)
  for (const probe of piece.probes) {
    await trx('probe_placements').insert({
      channel_id: idOf(ids.channels, `${piece.site}/${probe.device}/${probe.channel}`),
      role: 'meat',
      piece_id: made.id,
      during: `[${iso(probe.fromMs)},${probe.toMs === null ? '' : iso(probe.toMs)})`,
    })
  }
}

/** The demo goes by names, the log by numbers. */
function factWithIds(ids: DemoHouseIds, site: string, fact: PieceFact): EventFact {
  const cookerId = (name: string) => idOf(ids.cookers, `${site}/${name}`)
  switch (fact.kind) {
    case 'on':
      return {
        kind: 'on',
        cookerId: cookerId(fact.cooker),
        ...(fact.position === undefined ? {} : { position: fact.position }),
      }
    case 'moved':
      return { kind: 'moved', toCookerId: cookerId(fact.toCooker) }
    case 'hold':
      return { kind: 'hold', ...(fact.cooker === undefined ? {} : { cookerId: cookerId(fact.cooker) }) }
    default:
      return fact
  }
}

/** What was logged on the fires; each cooker is left as its last change set it. */
async function seedCookerEvents(
  trx: Knex,
  ids: DemoHouseIds,
  events: readonly DemoCookerEvent[],
): Promise<void> {
  const inOrder = [...events].sort((a, b) => a.atMs - b.atMs)
  for (const site of demoSites) {
    for (const cooker of site.cookers) {
      const cookerId = idOf(ids.cookers, `${site.slug}/${cooker.name}`)
      let setC = cooker.pitSetC
      const rows = inOrder
        .filter((event) => event.site === site.slug && event.cooker === cooker.name)
        .map(({ fact, ...event }, index) => {
          const pitSetBeforeC = fact.kind === 'pit_set' ? setC : null
          if (fact.kind === 'pit_set') setC = fact.pitSetC
          return {
            id: namedUuid(`${site.slug}/${cooker.name}/${event.atMs}/${index}`),
            siteId: idOf(ids.sites, site.slug),
            subject: { cookerId },
            happenedAt: event.atMs,
            recordedAt: event.recordedMs,
            userId: idOf(ids.users, event.by),
            fact,
            note: event.note ?? null,
            correctsId: null,
            pitSetBeforeC,
          }
        })
      await eventsRepository(trx).add(rows)
      await trx.raw(
        `update cookers set pit_set_c = :setC, band_low_c = band_low_c + :setC - pit_set_c,
           band_high_c = band_high_c + :setC - pit_set_c where id = :cookerId and pit_set_c <> :setC`,
        { cookerId, setC },
      )
    }
  }
}

/** So many rows a statement: as the ingest does it. */
const batchRows = 5000

async function seedReadings(trx: Knex, ids: DemoHouseIds, series: DemoNights['series']): Promise<void> {
  let batch: ReadingRow[] = []
  for (const { site, device, channel, atMs, valueC } of series) {
    const channelId = idOf(ids.channels, `${site}/${device}/${channel}`)
    for (const [index, at] of atMs.entries()) {
      const value = valueC[index]
      if (value === undefined || Number.isNaN(value)) continue
      batch.push({ channelId, atMs: Math.round(at), value, receivedAtMs: Math.round(at) })
      if (batch.length < batchRows) continue
      await storeReadings(trx, batch)
      batch = []
    }
  }
  await storeReadings(trx, batch)
}

function idOf(ids: ReadonlyMap<string, number>, name: string): number {
  const id = ids.get(name)
  if (id === undefined) throw new RangeError(`The demo house has no ${name}.`)
  return id
}

function iso(ms: number): string {
  return new Date(ms).toISOString()
}
