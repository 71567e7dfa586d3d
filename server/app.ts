import express, { Router, type Express } from 'express'
import type { Logger } from 'pino'
import { maxPayloadBytes } from '#shared/contract/mqtt.ts'
import { readingEndpoints } from '#shared/contract/reading.ts'
import { apiDocs } from './http/api-docs.ts'
import { clientFiles } from './http/client-files.ts'
import { errorHandler } from './http/error-handler.ts'
import { createMount, type Guard, type Mount } from './http/mount.ts'
import { HttpProblem, notFound } from './http/problem.ts'
import { requestLog } from './http/request-log.ts'
import { securityHeaders } from './http/security-headers.ts'

export interface AppDeps {
  log: Logger
  guard: Guard
  /** Mounts every feature's endpoints; the router is for what goes before one of them, such as a limit. */
  features: (mount: Mount, router: Router) => void
  build: string
  publicUrl?: string | undefined
  /** Where the built client is; without it only the API is served. */
  clientDir?: string | undefined
  /** How many reverse proxies stand before this server. */
  trustProxy?: number | undefined
  /** Compare every answer with the contract: not in production. */
  checkAnswers?: boolean | undefined
}

const jsonTypes = ['application/json', 'application/*+json']
/** The largest body that is read, in bytes. */
const maxBodyBytes = 256 * 1024

/** Makes the Express app. It never listens: whoever makes it gives it to an HTTP server. */
export function createApp(deps: AppDeps): Express {
  const app = express()
  app.disable('x-powered-by')
  app.set('trust proxy', deps.trustProxy ?? 0)

  app.use(requestLog(deps.log))
  app.use(securityHeaders(deps.publicUrl))
  app.use('/api', (_request, response, next) => {
    response.set('Cache-Control', 'no-store')
    next()
  })
  app.use(readingEndpoints.send.path, express.json({ limit: maxPayloadBytes, type: jsonTypes }))
  app.use('/api', express.json({ limit: maxBodyBytes, type: jsonTypes }), onlyJson)

  const router = Router()
  deps.features(createMount(router, deps.guard, { checkAnswers: deps.checkAnswers ?? false }), router)
  app.use(router)
  app.use(apiDocs({ build: deps.build }))
  app.use('/api', () => {
    throw notFound('There is no such address in this API. /api/docs lists them.')
  })
  if (deps.clientDir !== undefined) app.use(clientFiles(deps.clientDir))
  app.use(() => {
    throw notFound()
  })
  app.use(errorHandler(deps.log))
  return app
}

/** A body that nobody parsed would look like none at all. */
const onlyJson: express.RequestHandler = (request, _response, next) => {
  const isUnread = request.body === undefined && request.is(jsonTypes) === false
  if (isUnread && request.get('Content-Length') !== '0') {
    throw new HttpProblem(415, 'Unknown form', 'Send JSON, with the header Content-Type: application/json.')
  }
  next()
}
