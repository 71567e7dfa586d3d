import { readingEndpoints } from '#shared/contract/reading.ts'
import type { Mount } from '../../http/mount.ts'
import type { ReadingService } from './service.ts'

export function readingRoutes(mount: Mount, { readings }: { readings: ReadingService }): void {
  mount(readingEndpoints.ofChannel, ({ params, query }) => readings.ofChannel(params.channelId, query))
  mount(readingEndpoints.traces, ({ site, query }) => readings.tracesOfSite(site.id, query))
  mount(readingEndpoints.ofPiece, ({ params, query }) => readings.traceOfPiece(params.pieceId, query))
  mount(readingEndpoints.send, ({ device, body }) => readings.send(device, body))
}
