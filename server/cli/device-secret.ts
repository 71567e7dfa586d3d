import type { Knex } from 'knex'
import { z } from 'zod'
import { Slug } from '#shared/contract/common.ts'
import { deviceEndpoints, secretOverlapHours } from '#shared/contract/device.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { createDeviceBook } from '../features/devices/device-book.ts'
import { createDeviceSecrets } from '../features/devices/secrets.ts'
import { deviceCommand, siteNamed, UsageError } from './device-command.ts'

const usage = `Makes a new secret for a device and prints it as one line of JSON; it is shown this once. The secret before it
stays good for the overlap, ${secretOverlapHours.usual} hours when left out; 0 ends it at once.

npm run --silent device:secret -- --site quarry-road --device north-box --overlap-hours 24`

const options = z.object({
  site: Slug,
  device: Slug,
  'overlap-hours': z
    .string()
    .regex(/^\d+(\.\d+)?$/, 'a number of hours')
    .transform(Number)
    .pipe(deviceEndpoints.renewSecret.body.shape.overlapHours)
    .default(secretOverlapHours.usual),
})
const DeviceRow = z.object({ id: z.int() })

await deviceCommand({ usage, options }, async (db, { site, device, 'overlap-hours': overlapHours }) => {
  const secrets = createDeviceSecrets({
    db,
    clock: systemClock,
    // A server that runs meanwhile reads the new secret when it is first given, and lets go of the old one's
    // connections within seconds of its end.
    book: createDeviceBook({ db, clock: systemClock }),
  })
  return secrets.renew(await deviceNamed(db, await siteNamed(db, site), device), { overlapHours })
})

async function deviceNamed(db: Knex, site: { id: number; slug: string }, slug: string): Promise<number> {
  const row: unknown = await db('devices').where({ site_id: site.id, slug }).first('id')
  const device = DeviceRow.optional().parse(row)
  if (device) return device.id
  const rows: unknown = await db('devices').where({ site_id: site.id }).orderBy('slug').select('slug')
  const slugs = z
    .array(z.object({ slug: z.string() }))
    .parse(rows)
    .map((one) => one.slug)
  throw new UsageError(`${site.slug} has no device “${slug}”. There are: ${slugs.join(', ') || 'none'}.`)
}
