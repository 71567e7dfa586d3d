import type { Knex } from 'knex'
import { z } from 'zod'
import { sensorKinds, type Sensor, type SensorSpan } from '#shared/domain/sensor.ts'

const SensorRow = z.object({
  channel_id: z.int(),
  kind: z.enum(sensorKinds),
  offset_c: z.number(),
  a: z.number().nullable(),
  b: z.number().nullable(),
  c: z.number().nullable(),
  from_ms: z.number().or(z.literal(-Infinity)),
  to_ms: z.number().or(z.literal(Infinity)).nullable(),
})
type SensorRow = z.infer<typeof SensorRow>

/** The sensors that have hung on channels, each channel's from the newest back. */
export async function sensorsOfChannels(
  db: Knex,
  channelIds: readonly number[],
): Promise<Map<number, SensorSpan[]>> {
  const found: unknown = await db.raw(
    `select channel_id, kind, offset_c, coefficient_a as a, coefficient_b as b, coefficient_c as c,
       extract(epoch from lower(during))::float8 * 1000 as from_ms,
       extract(epoch from upper(during))::float8 * 1000 as to_ms
     from sensors where channel_id = any(?) order by channel_id, lower(during) desc`,
    [[...channelIds]],
  )
  const spans = new Map<number, SensorSpan[]>(channelIds.map((id) => [id, []]))
  for (const row of z.object({ rows: z.array(SensorRow) }).parse(found).rows) {
    spans
      .get(row.channel_id)
      ?.push({ fromMs: row.from_ms, toMs: row.to_ms ?? Infinity, sensor: sensorOf(row) })
  }
  return spans
}

function sensorOf({ kind, offset_c: offsetC, a, b, c }: SensorRow): Sensor {
  if (kind !== 'thermistor') return { kind, offsetC }
  // The table's check constraint asks for all three.
  return { kind, offsetC, curve: { a: a ?? NaN, b: b ?? NaN, c: c ?? NaN } }
}
