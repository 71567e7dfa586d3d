import type { Router } from 'express'
import type { House } from '#shared/contract/session.ts'
import type { Services } from './compose-services.ts'
import { cookerRoutes } from './features/cookers/routes.ts'
import { deviceRoutes } from './features/devices/routes.ts'
import { eventRoutes } from './features/events/routes.ts'
import { forecastRoutes } from './features/forecasts/routes.ts'
import { healthRoutes } from './features/health/routes.ts'
import type { HealthService } from './features/health/service.ts'
import { jobRoutes } from './features/jobs/routes.ts'
import { pieceRoutes } from './features/pieces/routes.ts'
import { readingRoutes } from './features/readings/routes.ts'
import { serviceRoutes } from './features/services/routes.ts'
import { createRefreshCookie } from './features/session/refresh-cookie.ts'
import { sessionRoutes } from './features/session/routes.ts'
import type { SignInLimit } from './features/session/sign-in-limit.ts'
import { siteRoutes } from './features/sites/routes.ts'
import { tonightRoutes } from './features/tonight/routes.ts'
import type { Mount } from './http/mount.ts'

export interface RouteDeps {
  services: Services
  health: HealthService
  house: () => Promise<House>
  signInLimit: SignInLimit
  /** Whether people reach this server over HTTPS. */
  secure: boolean
}

/** Mounts every feature of the server. */
export function mountFeatures(mount: Mount, router: Router, deps: RouteDeps): void {
  const { services, health, house, signInLimit, secure } = deps
  sessionRoutes(mount, router, {
    sessions: services.sessions,
    cookie: createRefreshCookie(secure),
    limit: signInLimit,
    house,
    issueTicket: services.tickets.issue,
  })
  siteRoutes(mount, services)
  tonightRoutes(mount, services)
  serviceRoutes(mount, services)
  cookerRoutes(mount, services)
  deviceRoutes(mount, services)
  readingRoutes(mount, services)
  pieceRoutes(mount, services)
  eventRoutes(mount, services)
  forecastRoutes(mount, services)
  jobRoutes(mount, services)
  healthRoutes(mount, { health })
}
