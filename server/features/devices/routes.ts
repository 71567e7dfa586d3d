import { deviceEndpoints } from '#shared/contract/device.ts'
import type { Mount } from '../../http/mount.ts'
import type { DeviceService } from './service.ts'

export function deviceRoutes(mount: Mount, { devices }: { devices: DeviceService }): void {
  mount(deviceEndpoints.list, async ({ site }) => ({ items: await devices.listOfSite(site.id) }))
  mount(deviceEndpoints.add, ({ person, site, body }) => devices.add({ site, userId: person.userId }, body))
  mount(deviceEndpoints.rejected, ({ site, query }) => devices.rejected(site.id, query))
}
