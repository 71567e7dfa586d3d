import { deviceEndpoints } from '#shared/contract/device.ts'
import { may } from '#shared/domain/permissions.ts'
import type { Mount, Person } from '../../http/mount.ts'
import type { DeviceService } from './service.ts'

export function deviceRoutes(mount: Mount, { devices }: { devices: DeviceService }): void {
  mount(deviceEndpoints.list, async ({ site }) => ({ items: await devices.listOfSite(site.id) }))
  mount(deviceEndpoints.add, ({ person, site, body }) => devices.add({ site, userId: person.userId }, body))
  mount(deviceEndpoints.statuses, async ({ person, site }) => ({
    items: await devices.statuses(site.id, seesAddresses(person, site)),
  }))
  mount(deviceEndpoints.status, ({ person, site, params }) =>
    devices.status(params.deviceId, seesAddresses(person, site)),
  )
  mount(deviceEndpoints.secrets, async ({ params }) => ({
    items: await devices.secrets.list(params.deviceId),
  }))
  mount(deviceEndpoints.renewSecret, ({ person, params, body }) =>
    devices.secrets.renew(params.deviceId, body, person),
  )
  mount(deviceEndpoints.endSecret, async ({ person, params }) => {
    await devices.secrets.end(params.deviceId, params.secretId, person)
    return undefined
  })
  mount(deviceEndpoints.rejected, ({ site, query }) => devices.rejected(site.id, query))
}

function seesAddresses({ rolesBySite }: Person, site: { id: number }): { withAddresses: boolean } {
  return { withAddresses: may(rolesBySite.get(site.id) ?? [], 'device.manage') }
}
