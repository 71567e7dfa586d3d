import { Router } from 'express'
import swaggerUi from 'swagger-ui-express'
import { allEndpoints } from '#shared/contract/endpoints.ts'
import { openApiDocument } from './openapi.ts'

/** Where the API describes itself: the document, and a page to read and try it. */
export const apiDocsPaths = { document: '/api/openapi.json', page: '/api/docs' } as const

/** Serves the OpenAPI document and its page. All scripts are files of our own, so the usual content policy holds. */
export function apiDocs({ build }: { build: string }): Router {
  const router = Router()
  const document = JSON.stringify(openApiDocument(allEndpoints, build))
  const options = { swaggerUrl: apiDocsPaths.document, customSiteTitle: 'API · Coalhand' }

  router.get(apiDocsPaths.document, (_request, response) => {
    response.type('json').end(document)
  })
  // Files on the page are named relative to it: without the slash they would be looked for one level up.
  router.get(apiDocsPaths.page, (request, response, next) => {
    if (request.path.endsWith('/')) next()
    else response.redirect(301, `${apiDocsPaths.page}/`)
  })
  router.use(
    apiDocsPaths.page,
    ...swaggerUi.serveFiles(undefined, options),
    swaggerUi.setup(undefined, options),
  )
  return router
}
