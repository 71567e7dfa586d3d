import type { Knex } from 'knex'
import type { RejectionReason } from '#shared/contract/device.ts'

/** Something a device sent that was not taken. */
export interface Rejection {
  deviceId: number
  receivedAtMs: number
  topic: string
  reason: RejectionReason
  detail: string
  /** What was sent; its beginning is kept. */
  payload: string
}

/** Beyond these a day, a device's rejections are counted and no longer kept. */
const keptADay = 200

const maxDetail = 400
const maxPayload = 1000

const statement = `
  with sent as (
    select device_id, to_timestamp(received_ms / 1000.0) as received_at, topic, reason, detail, payload, place,
      (to_timestamp(received_ms / 1000.0) at time zone 'UTC')::date as day
    from unnest(?::int[], ?::float8[], ?::text[], ?::text[], ?::text[], ?::text[])
      with ordinality as s (device_id, received_ms, topic, reason, detail, payload, place)
  ), counted as (
    insert into rejection_counts as c (device_id, day, count)
    select device_id, day, count(*) from sent group by 1, 2 order by 1, 2
    on conflict (device_id, day) do update set count = c.count + excluded.count
    returning device_id, day, count
  ), numbered as (
    select sent.*, counted.count - count(*) over (partition by sent.device_id, sent.day)
      + row_number() over (partition by sent.device_id, sent.day order by place) as number
    from sent join counted using (device_id, day)
  )
  insert into rejected_messages (device_id, received_at, topic, reason, detail, payload)
  select device_id, received_at, topic, reason, detail, payload from numbered where number <= ? order by place`

/** Keeps rejections with their reason: each is counted, the first of a device's day are kept as they came. */
export async function storeRejections(db: Knex, rejections: readonly Rejection[]): Promise<void> {
  if (rejections.length === 0) return
  await db.raw(statement, [
    rejections.map(({ deviceId }) => deviceId),
    rejections.map(({ receivedAtMs }) => receivedAtMs),
    rejections.map(({ topic }) => storable(topic, maxDetail)),
    rejections.map(({ reason }) => reason),
    rejections.map(({ detail }) => storable(detail, maxDetail)),
    rejections.map(({ payload }) => storable(payload, maxPayload)),
    keptADay,
  ])
}

/** PostgreSQL's text holds every character but NUL. */
function storable(text: string, length: number): string {
  return text.slice(0, length).replaceAll('\0', '\uFFFD')
}
