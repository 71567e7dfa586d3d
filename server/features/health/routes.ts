import { healthEndpoints } from '#shared/contract/health.ts'
import type { Mount } from '../../http/mount.ts'
import type { HealthService } from './service.ts'

export function healthRoutes(mount: Mount, { health }: { health: HealthService }): void {
  mount(healthEndpoints.health, async ({ response }) => {
    const told = await health.health()
    // What only looks at the status, such as a load balancer, is to send devices and people elsewhere.
    if (!told.database.ok || !told.ingest.ok) response.status(503)
    return told
  })
}
