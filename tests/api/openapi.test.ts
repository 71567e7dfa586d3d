import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { z } from 'zod'
import { allEndpoints } from '#shared/contract/endpoints.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'

let test: TestServer
let text: string

beforeAll(async () => {
  test = await startTestServer()
  text = (await test.api.get('/api/openapi.json').expect(200)).text
})
afterAll(() => test.stop())

const Schema = z.looseObject({})
const Content = z.record(
  z.string().regex(/^application\/(problem\+)?json$/),
  z.strictObject({ schema: Schema }),
)
/** The rules of OpenAPI 3.1 for the objects that this document uses; strict, so that nothing unknown slips in. */
const Operation = z.strictObject({
  operationId: z.string().regex(/^[a-z]\w+$/),
  tags: z.array(z.string()).length(1),
  summary: z.string().min(5),
  description: z.string().optional(),
  security: z.array(z.partialRecord(z.enum(['person', 'device', 'refresh']), z.array(z.never()))).max(1),
  parameters: z.array(
    z.strictObject({
      name: z.string(),
      in: z.enum(['path', 'query', 'header']),
      required: z.boolean(),
      description: z.string().optional(),
      schema: Schema,
    }),
  ),
  requestBody: z.strictObject({ required: z.literal(true), content: Content }).optional(),
  responses: z.record(
    z.string().regex(/^([1-5]\d\d|default)$/),
    z.strictObject({
      description: z.string().min(1),
      headers: z.record(z.string(), z.strictObject({ description: z.string(), schema: Schema })).optional(),
      content: Content.optional(),
    }),
  ),
})
const Document = z.strictObject({
  openapi: z.string().regex(/^3\.1\.\d$/),
  info: z.strictObject({
    title: z.literal('Coalhand'),
    version: z.string(),
    description: z.string(),
    license: z.strictObject({ name: z.literal('MIT'), identifier: z.literal('MIT') }),
  }),
  tags: z.array(z.strictObject({ name: z.string() })),
  paths: z.record(
    z.string().regex(/^\/api\/[\w/{}-]+$/),
    z.partialRecord(z.enum(['get', 'post', 'put', 'patch', 'delete']), Operation),
  ),
  components: z.strictObject({
    schemas: z.record(z.string().regex(/^[A-Za-z]+$/), Schema),
    securitySchemes: z.record(z.string(), z.looseObject({ type: z.enum(['http', 'apiKey']) })),
  }),
})

const operations = () =>
  Object.entries(Document.parse(JSON.parse(text)).paths).flatMap(([path, methods]) =>
    Object.entries(methods).map(([method, operation]) => ({ path, method, operation })),
  )

describe('the OpenAPI document', () => {
  it('has the form that OpenAPI 3.1 wants', () => {
    expect(() => Document.parse(JSON.parse(text))).not.toThrow()
  })

  it('points at schemas that are there, and each of them is JSON Schema that can be used', () => {
    const { components } = Document.parse(JSON.parse(text))
    const names = [...text.matchAll(/"\$ref":"([^"]+)"/g)].map(([, target]) => target ?? '')
    expect(names.length).toBeGreaterThan(50)
    for (const name of new Set(names)) {
      expect(Object.keys(components.schemas)).toContain(name.replace('#/components/schemas/', ''))
    }
    for (const schema of Object.values(components.schemas)) expect(schema).toHaveProperty(schemaKeyOf(schema))
  })

  it('names every part of a path as a parameter, and no other', () => {
    for (const { path, operation } of operations()) {
      const inPath = [...path.matchAll(/\{(\w+)\}/g)].map(([, name]) => name)
      const declared = operation.parameters.filter((parameter) => parameter.in === 'path')
      expect(declared.map(({ name }) => name).sort()).toEqual(inPath.sort())
      expect(declared.every(({ required }) => required)).toBe(true)
    }
  })

  it('has a name of its own for every operation', () => {
    const ids = operations().map(({ operation }) => operation.operationId)
    expect(new Set(ids).size).toBe(ids.length)
  })

  it('describes every endpoint of the contract, with who may call it', () => {
    for (const endpoint of allEndpoints) {
      const path = endpoint.path.replaceAll(/:(\w+)/g, '{$1}')
      const found = operations().find((one) => one.path === path && one.method === endpoint.method)
      expect(found, `${endpoint.method} ${endpoint.path}`).toBeDefined()
      const scheme = Object.keys(found?.operation.security[0] ?? {})[0]
      const wanted = {
        ...{ 'signed-in': 'person', site: 'person', 'any-site': 'person' },
        ...{ device: 'device', public: undefined },
      }
      if (endpoint.access.kind !== 'public') expect(scheme).toBe(wanted[endpoint.access.kind])
      expect(Object.keys(found?.operation.responses ?? {})).toContain(String(endpoint.status))
    }
    expect(operations()).toHaveLength(allEndpoints.length)
  })

  it('tells of MQTT and of the socket', () => {
    const { info, components } = Document.parse(JSON.parse(text))
    expect(info.description).toContain('coalhand/{site}/{device}/readings')
    expect(info.description).toContain('`/live`')
    expect(components.schemas).toHaveProperty('LiveServerMessage')
  })
})

describe('what the server really answers', () => {
  it('is the contract, no more and no less', () => {
    const mounted = routesOf(test.server.app.router).filter(
      (route) => !/ \/api\/(docs|openapi\.json)/.test(route),
    )
    const contract = allEndpoints.map(({ method, path }) => `${method} ${path}`)
    expect(mounted.sort()).toEqual([...new Set(contract)].sort())
  })
})

describe('the page of the API', () => {
  it('is served by this server alone, under the usual content policy', async () => {
    await test.api.get('/api/docs').expect(301).expect('Location', '/api/docs/')
    const page = await test.api.get('/api/docs/').expect(200)
    expect(page.text).toContain('<title>API · Coalhand</title>')
    expect(page.get('Content-Security-Policy')).toContain("script-src 'self';")
    const scripts = [...page.text.matchAll(/<script src="\.\/([^"]+)"/g)].map(([, name]) => name ?? '')
    expect(page.text.match(/<script(?! src)/)).toBeNull()
    for (const script of scripts) await test.api.get(`/api/docs/${script}`).expect(200)
    const start = await test.api.get('/api/docs/swagger-ui-init.js').expect(200)
    expect(start.text).toContain('"swaggerUrl": "/api/openapi.json"')
  })
})

function schemaKeyOf(schema: object): string {
  return ['type', 'anyOf', 'oneOf', 'allOf', '$ref', 'enum'].find((key) => key in schema) ?? 'type'
}

/** Routers are functions with a list of layers. */
const Stacked = z.custom<{ stack: unknown[] }>(
  (value) => typeof value === 'function' && 'stack' in value && Array.isArray(value.stack),
)
const RouteLayer = z.object({
  route: z.object({ path: z.string(), stack: z.array(z.object({ method: z.string().optional() })) }),
})
const OtherLayer = z.object({ handle: z.unknown() })

/** Every route of a router and of the routers within it, as `method path`. */
function routesOf(router: unknown): string[] {
  const found = Stacked.parse(router).stack.flatMap((layer) => {
    const route = RouteLayer.safeParse(layer).data?.route
    if (route) return route.stack.map(({ method }) => `${method ?? 'all'} ${route.path}`)
    const { handle } = OtherLayer.parse(layer)
    return Stacked.safeParse(handle).success ? routesOf(handle) : []
  })
  return [...new Set(found)]
}
