import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { Problem } from '#shared/contract/common.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

const clientDir = mkdtempSync(join(tmpdir(), 'coalhand-client-'))
let test: TestServer

beforeAll(async () => {
  mkdirSync(join(clientDir, 'assets'))
  writeFileSync(join(clientDir, 'assets/wall-a1b2c3.js'), 'export {}')
  writeFileSync(join(clientDir, 'icon.svg'), '<svg xmlns="http://www.w3.org/2000/svg"/>')
  test = await startTestServer({ clientDir })
})
afterAll(async () => {
  await test.stop()
  rmSync(clientDir, { recursive: true })
})

const policyOf = (header: string | undefined) =>
  Object.fromEntries(
    (header ?? '').split(';').map((directive): [string, string] => {
      const [name = '', ...values] = directive.trim().split(' ')
      return [name, values.join(' ')]
    }),
  )

describe('security headers', () => {
  it('let nothing in from elsewhere', async () => {
    const response = await test.api.get('/api/house')
    const host = new URL(test.url).host
    expect(policyOf(response.get('Content-Security-Policy'))).toEqual({
      'default-src': "'self'",
      'script-src': "'self'",
      'style-src': "'self' 'unsafe-inline'",
      'img-src': "'self' data: blob:",
      'font-src': "'self'",
      'connect-src': `'self' ws://${host}`,
      'worker-src': "'self'",
      'manifest-src': "'self'",
      'object-src': "'none'",
      'base-uri': "'self'",
      'form-action': "'self'",
      'frame-ancestors': "'none'",
    })
    expect(response.get('X-Content-Type-Options')).toBe('nosniff')
    expect(response.get('X-Frame-Options')).toBe('DENY')
    expect(response.get('Referrer-Policy')).toBe('no-referrer')
    expect(response.get('X-Powered-By')).toBeUndefined()
    expect(response.get('Strict-Transport-Security')).toBeUndefined()
  })

  it('take no directive from a made-up host', async () => {
    const response = await test.api.get('/api/house').set('Host', "x; script-src 'unsafe-inline'")
    expect(policyOf(response.get('Content-Security-Policy'))['script-src']).toBe("'self'")
  })

  it('keep browsers to HTTPS once the house has an HTTPS address', async () => {
    const secure = await startTestServer({ publicUrl: 'https://pits.quarryroad.example' })
    const response = await secure.api.get('/api/house')
    expect(response.get('Strict-Transport-Security')).toMatch(/^max-age=\d{8}/)
    expect(policyOf(response.get('Content-Security-Policy'))['connect-src']).toMatch(/^'self' wss:/)
    await secure.stop()
  })

  it('keep answers of the API out of every cache', async () => {
    const response = await test.as('lead').get('/api/sites').expect(200)
    expect(response.get('Cache-Control')).toBe('no-store')
  })
})

describe('the client', () => {
  it('says what to do while it is not built', async () => {
    const response = await test.api.get('/').set('Accept', 'text/html').expect(503)
    expect(Problem.parse(response.body).detail).toBe('The pages are not built yet: run npm run build.')
  })

  it('keeps files with a hash in their name for ever, and asks again for the rest', async () => {
    writeFileSync(join(clientDir, 'index.html'), '<!doctype html><title>Coalhand</title>')
    const asset = await test.api.get('/assets/wall-a1b2c3.js').expect(200)
    expect(asset.get('Cache-Control')).toBe('public, max-age=31536000, immutable')
    const icon = await test.api.get('/icon.svg').expect(200)
    expect(icon.get('Cache-Control')).toBe('no-cache')
    const page = await test.api.get('/').expect(200)
    expect(page.get('Cache-Control')).toBe('no-cache')
    await test.api
      .get('/')
      .set('If-None-Match', page.get('ETag') ?? '')
      .expect(304)
  })

  it('gives the page for every address that a person may open, and only for those', async () => {
    const page = await test.api.get('/quarry-road/pieces/12').set('Accept', 'text/html,*/*;q=0.8').expect(200)
    expect(page.text).toContain('<title>Coalhand</title>')
    await test.api.get('/assets/wall-old.js').set('Accept', 'text/html').expect(404)
    await test.api.get('/missing.png').set('Accept', 'image/*').expect(404)
    await test.api.get('/missing.js').set('Accept', '*/*').expect(404)
    await test.api.post('/quarry-road').send({}).expect(404)
    await test.api.get('/api/nothing').set('Accept', 'text/html').expect(404)
    await test.api
      .get('/../../etc/passwd')
      .expect(200)
      .expect(/Coalhand/)
    await test.api.get('/assets/%2e%2e/%2e%2e/%2e%2e/etc/passwd').expect(404)
  })
})
