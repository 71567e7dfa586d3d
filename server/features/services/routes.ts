import { siteEndpoints } from '#shared/contract/site.ts'
import type { Mount } from '../../http/mount.ts'
import type { ServicesService } from './service.ts'

export function serviceRoutes(mount: Mount, { services }: { services: ServicesService }): void {
  mount(siteEndpoints.addService, ({ person, site, body }) => services.add({ person, site }, body))
}
