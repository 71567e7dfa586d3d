import { existsSync } from 'node:fs'
import { join } from 'node:path'
import express, { Router, type Request } from 'express'
import { notFound, unavailable } from './problem.ts'

/**
 * Serves the built client: files with a hash in their name for ever, everything else (the page, a service worker, the
 * manifest) only after asking again, and the page itself for every address that a person may open.
 * @param directory where the build is; looked at on each request, so that a build made later is found
 */
export function clientFiles(directory: string): Router {
  const router = Router()
  const page = join(directory, 'index.html')
  router.use(
    '/assets',
    express.static(join(directory, 'assets'), { immutable: true, maxAge: '365d', index: false }),
  )
  router.use('/assets', () => {
    throw notFound('This file belongs to another build. Load the page anew.')
  })
  router.use(
    express.static(directory, { index: false, cacheControl: false, setHeaders: (res) => askAgain(res) }),
  )
  router.get('/{*path}', (request, response, next) => {
    if (!isForPeople(request)) {
      next()
      return
    }
    if (!existsSync(page)) throw unavailable('The pages are not built yet: run npm run build.')
    askAgain(response)
    response.sendFile(page, { cacheControl: false })
  })
  return router
}

function askAgain(response: { setHeader(name: string, value: string): unknown }): void {
  response.setHeader('Cache-Control', 'no-cache')
}

/** A page, rather than a file that is missing: browsers name HTML when they open one. */
function isForPeople(request: Request): boolean {
  const last = request.path.split('/').at(-1) ?? ''
  return (
    (request.get('Accept') ?? '').includes('text/html') ||
    (!last.includes('.') && request.accepts('html') !== false)
  )
}
