import { siteEndpoints } from '#shared/contract/site.ts'
import type { Mount } from '../../http/mount.ts'
import type { TonightReadModel } from './read-model.ts'

export function tonightRoutes(mount: Mount, { tonight }: { tonight: TonightReadModel }): void {
  mount(siteEndpoints.tonight, ({ site }) => tonight.ofSite(site.slug))
}
