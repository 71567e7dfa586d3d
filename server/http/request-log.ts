import { randomUUID } from 'node:crypto'
import type { IncomingMessage, ServerResponse } from 'node:http'
import type { Logger } from 'pino'
import { pinoHttp } from 'pino-http'

/**
 * Logs each request once it is answered: changes and refusals at `info`, failures at `warn` (the error handler has
 * written the error itself), reads, polls and assets at `debug`. Headers and bodies are never written, and so no
 * password, token or cookie.
 */
export function requestLog(log: Logger) {
  return pinoHttp({
    logger: log,
    genReqId: () => randomUUID(),
    customLogLevel: levelOf,
    customSuccessMessage: (request, response) =>
      `${request.method ?? ''} ${pathOf(request)} ${response.statusCode}`,
    customErrorMessage: (request, response) =>
      `${request.method ?? ''} ${pathOf(request)} ${response.statusCode}`,
    wrapSerializers: false,
    serializers: {
      req: (request: IncomingMessage) => ({ id: request.id, from: request.socket.remoteAddress }),
      res: () => undefined,
    },
  })
}

function levelOf(request: IncomingMessage, response: ServerResponse) {
  if (response.statusCode >= 500) return 'warn'
  // Refreshing without a cookie is how a browser finds out that nobody is signed in.
  const isRoutine =
    request.method === 'GET' || request.method === 'HEAD' || pathOf(request) === '/api/session/refresh'
  if (response.statusCode >= 400) return isRoutine ? 'debug' : 'info'
  return isRoutine || isMachineTraffic(request) ? 'debug' : 'info'
}

/** Readings and tickets come all the time. */
function isMachineTraffic(request: IncomingMessage): boolean {
  const path = pathOf(request)
  return path === '/api/readings' || path === '/api/live/ticket'
}

function pathOf(request: IncomingMessage): string {
  const url =
    'originalUrl' in request && typeof request.originalUrl === 'string' ? request.originalUrl : request.url
  return (url ?? '').split('?', 1)[0] ?? ''
}
