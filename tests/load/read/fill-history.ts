import type { Knex } from 'knex'
import { z } from 'zod'
import { ensurePartitions } from '../../../server/db/partitions.ts'
import { makeHouse, makePiece, type House } from '../../harness/house.ts'

const minuteMs = 60_000
const weekMs = 7 * 24 * 60 * minuteMs
export const nightMs = 14 * 60 * minuteMs
const boxes = 25
const channelsPerBox = 8
/** Each probe sends once a minute: so the minutes, which charts read, are as many as the readings. */
const readingsANight = nightMs / minuteMs
const pits = 10
/** Pieces to look at, spread over all nights. */
const finishedPieces = 40
const openPieces = 24

export interface History {
  house: House
  /** Of 200 probes. The first ones hang in pits; the very first never stops. */
  channelIds: number[]
  /** Numbers of pieces that cooked for fourteen hours. */
  pieceIds: number[]
  rows: number
  nights: number
  /** When the newest reading was, ms since 1970 UTC. */
  endMs: number
}

/**
 * Fills a migrated database with about so many readings, roll-ups included, week by week in the order of time, as they
 * would have come: one night a week of fourteen hours and 200 probes, and a pit that never goes out.
 */
export async function fillHistory(db: Knex, rows: number, endMs: number): Promise<History> {
  const house = await makeHouse(db)
  const channelIds = await makeChannels(db, house)
  const nights = Math.max(1, Math.round(rows / (channelIds.length * readingsANight)))
  const nightStarts = Array.from(
    { length: nights },
    (_, index) => endMs - nightMs - (nights - 1 - index) * weekMs,
  )
  await ensurePartitions(db, (nightStarts[0] ?? endMs) - weekMs, endMs)
  for (const startMs of nightStarts) await fillWeek(db, channelIds, startMs)
  const cookerIds = await makePits(db, house, channelIds)
  const pieceIds: number[] = []
  for (let index = 0; index < finishedPieces; index++) {
    const startMs = nightStarts[Math.floor((index * nights) / finishedPieces)] ?? endMs
    const place = { channelId: channelIds[pits + index], cookerId: cookerIds[index % cookerIds.length] }
    pieceIds.push(await addPiece(db, house, { ...place, startMs, isDone: true }))
  }
  const tonight = nightStarts.at(-1) ?? endMs
  for (let index = 0; index < openPieces; index++) {
    const place = {
      channelId: channelIds[pits + finishedPieces + index],
      cookerId: cookerIds[index % cookerIds.length],
    }
    await addPiece(db, house, { ...place, startMs: tonight, isDone: false })
  }
  // As the roll-up and autovacuum leave a database that has been running.
  await db.raw('truncate readings_due')
  for (const table of ['readings', 'readings_1m', 'readings_15m']) await db.raw(`vacuum (analyze) ${table}`)
  await db.raw('analyze')
  const stored = Number((await db('readings').count())[0]?.['count'])
  return { house, channelIds, pieceIds, rows: stored, nights, endMs }
}

/** A week ends with its night. Rising in the meat, level in the pit, with a little unrest. */
async function fillWeek(db: Knex, channelIds: readonly number[], startMs: number): Promise<void> {
  const bindings = {
    first: channelIds[0] ?? 0,
    last: channelIds.at(-1) ?? 0,
    pits,
    week: new Date(startMs + nightMs - weekMs).toISOString(),
    start: new Date(startMs).toISOString(),
    end: new Date(startMs + nightMs).toISOString(),
  }
  await db.raw(
    `insert into readings (channel_id, at, value, received_at)
     select channel_id, at, value, at + interval '80 ms' from (
       select c as channel_id, t + (c % 240) * interval '250 ms' as at,
         case when c < :first::int + :pits::int then 121 else 4 + 90 * (1 - exp(-extract(epoch from t - :start::timestamptz)::float8 / 18000)) end
           + (hashint4(c + extract(epoch from t)::int) % 100) / 100.0 as value
       from generate_series(:start::timestamptz, :end::timestamptz - interval '1 minute', interval '1 minute') as t
       cross join generate_series(:first::int, :last::int) as c
       union all
       select :first::int, t, 121 + (hashint4(extract(epoch from t)::int) % 500) / 100.0
       from generate_series(:week::timestamptz, :start::timestamptz - interval '5 minutes', interval '5 minutes') as t
     ) as r order by at`,
    bindings,
  )
  await db.raw(
    `insert into readings_1m (channel_id, minute, low, high, total, count, last, last_at)
     select channel_id, date_trunc('minute', at, 'UTC') as minute, min(value), max(value), sum(value), count(*),
       (array_agg(value order by at desc))[1], max(at)
     from readings where at >= :week::timestamptz and at < :end::timestamptz group by 1, 2 order by minute, 1`,
    bindings,
  )
  await db.raw(
    `insert into readings_15m (channel_id, quarter, low, high, total, count, last, last_at)
     select channel_id, date_bin('15 minutes', minute, '2000-01-01 00:00:00+00') as quarter, min(low), max(high),
       sum(total), sum(count), (array_agg(last order by minute desc))[1], max(last_at)
     from (
       -- Through the key, channel by channel: the minutes have no other index.
       select m.* from generate_series(:first::int, :last::int) as c
       cross join lateral (
         select * from readings_1m where channel_id = c and minute >= :week::timestamptz and minute < :end::timestamptz
       ) as m
     ) as m
     group by 1, 2 order by quarter, 1`,
    bindings,
  )
}

async function makeChannels(db: Knex, house: House): Promise<number[]> {
  const made: unknown = await db.raw(
    `with boxes as (
       insert into devices (site_id, slug, name, username, created_at)
       select :site, 'box-' || n, 'Box ' || n, 'bench.box-' || n, '2020-01-01Z' from generate_series(1, :boxes::int) as n
       returning id
     ), made as (
       insert into channels (device_id, number) select id, n from boxes, generate_series(1, :each::int) as n
       returning id
     ), hung as (
       insert into sensors (channel_id, kind, during) select id, 'digital', '[2020-01-01Z,)' from made
     )
     select id from made order by id`,
    { site: house.own.id, boxes, each: channelsPerBox },
  )
  return z
    .object({ rows: z.array(z.object({ id: z.int() })) })
    .parse(made)
    .rows.map(({ id }) => id)
}

/** Each of the first probes in a pit of its own. */
async function makePits(db: Knex, house: House, channelIds: readonly number[]): Promise<number[]> {
  const made: unknown = await db.raw(
    `with made as (
       insert into cookers (site_id, name, kind, capacity, position, pit_set_c, band_low_c, band_high_c)
       select :site, 'Pit ' || n, 'offset', 8, 10 + n, 121, 113, 129 from generate_series(1, :pits::int) as n
       returning id
     ), probes as (
       insert into probe_placements (channel_id, role, cooker_id, during)
       select :first::int + row_number() over (order by id) - 1, 'pit', id, '[2020-01-01Z,)' from made
     )
     select id from made order by id`,
    { site: house.own.id, pits, first: channelIds[0] ?? 0 },
  )
  return z
    .object({ rows: z.array(z.object({ id: z.int() })) })
    .parse(made)
    .rows.map(({ id }) => id)
}

async function addPiece(
  db: Knex,
  house: House,
  piece: { channelId: number | undefined; cookerId: number | undefined; startMs: number; isDone: boolean },
): Promise<number> {
  const id = await makePiece(db, house, house.own)
  const on = new Date(piece.startMs)
  const end = piece.isDone ? new Date(piece.startMs + nightMs) : null
  const during = `[${on.toISOString()},${end?.toISOString() ?? ''})`
  await db('pieces')
    .where({ id })
    .update({ on_at: on, done_at: end, stage: piece.isDone ? 'done' : 'cooking' })
  await db('placements').insert({ piece_id: id, cooker_id: piece.cookerId, during })
  await db('probe_placements').insert({ piece_id: id, channel_id: piece.channelId, role: 'meat', during })
  return id
}
