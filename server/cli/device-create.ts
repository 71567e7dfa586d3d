import { z } from 'zod'
import { Slug } from '#shared/contract/common.ts'
import { deviceEndpoints } from '#shared/contract/device.ts'
import { systemClock } from '#shared/domain/clock.ts'
import { createDeviceBook } from '../features/devices/device-book.ts'
import { createDeviceService } from '../features/devices/service.ts'
import { deviceCommand, siteNamed } from './device-command.ts'

const usage = `Adds a device and prints its credentials as one line of JSON; the secret is shown this once.

npm run --silent device:create -- --site quarry-road --name "North box" --channels 4`

const options = z.object({
  site: Slug,
  name: deviceEndpoints.add.body.shape.name,
  channels: z.coerce.number().pipe(deviceEndpoints.add.body.shape.channels),
})

await deviceCommand({ usage, options }, async (db, { site, ...device }) => {
  const devices = createDeviceService({
    db,
    clock: systemClock,
    book: createDeviceBook({ db, clock: systemClock }),
    // A server that runs meanwhile finds the device in the database when it first signs in.
    publish: () => undefined,
  })
  return devices.add({ site: await siteNamed(db, site) }, device)
})
