import type { Endpoint } from './endpoint.ts'
import { cookerEndpoints } from './cooker.ts'
import { deviceEndpoints } from './device.ts'
import { eventEndpoints } from './event.ts'
import { forecastEndpoints } from './forecast.ts'
import { healthEndpoints } from './health.ts'
import { jobEndpoints } from './job.ts'
import { pieceEndpoints } from './piece.ts'
import { readingEndpoints } from './reading.ts'
import { sessionEndpoints } from './session.ts'
import { siteEndpoints } from './site.ts'

/** Every endpoint of the product, by noun. The OpenAPI page and the access test walk this list. */
export const allEndpoints: readonly Endpoint[] = [
  sessionEndpoints,
  siteEndpoints,
  cookerEndpoints,
  pieceEndpoints,
  eventEndpoints,
  forecastEndpoints,
  deviceEndpoints,
  readingEndpoints,
  healthEndpoints,
  jobEndpoints,
].flatMap((group) => Object.values<Endpoint>(group))
