import { healthEndpoints } from '#shared/contract/health.ts'
import type { Mount } from '../../http/mount.ts'
import type { HealthService } from './service.ts'

export function healthRoutes(mount: Mount, { health }: { health: HealthService }): void {
  mount(healthEndpoints.health, () => health.health())
}
