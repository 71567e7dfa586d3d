import type { z } from 'zod'
import { Problem } from '#shared/contract/common.ts'
import type { Access, Endpoint } from '#shared/contract/endpoint.ts'
import { ClientMessage, ServerMessage } from '#shared/contract/live.ts'
import { matrix } from '#shared/domain/permissions.ts'
import { apiDescription } from './openapi-description.ts'
import { schemaCollector, type JsonSchema, type SchemaCollector } from './openapi-schemas.ts'

/** The parts of an OpenAPI 3.1 document that are written here. */
export interface OpenApiDocument {
  openapi: '3.1.1'
  info: { title: string; version: string; description: string; license: { name: string; identifier: string } }
  tags: { name: string }[]
  paths: Record<string, Record<string, Operation>>
  components: { schemas: Record<string, JsonSchema>; securitySchemes: Record<string, object> }
}

interface Operation {
  operationId: string
  tags: string[]
  summary: string
  description?: string
  security: Record<string, string[]>[]
  parameters: Parameter[]
  requestBody?: { required: boolean; content: Record<string, { schema: JsonSchema }> }
  responses: Record<string, ApiResponse>
}

interface Parameter {
  name: string
  in: 'path' | 'query' | 'header'
  required: boolean
  description?: string
  schema: JsonSchema
}

interface ApiResponse {
  description: string
  headers?: Record<string, { description: string; schema: JsonSchema }>
  content?: Record<string, { schema: JsonSchema }>
}

const securitySchemes = {
  person: { type: 'http', scheme: 'bearer', bearerFormat: 'JWT', description: 'The `token` of a session.' },
  device: { type: 'http', scheme: 'basic', description: 'A device’s user name and secret.' },
  refresh: { type: 'apiKey', in: 'cookie', name: 'coalhand_refresh', description: 'Set when signing in.' },
}

/** Where the refresh cookie counts, though the endpoint itself is open to anyone. */
const byRefreshCookie = new Set(['post /api/session/refresh', 'delete /api/session'])

/** Writes the OpenAPI document of a list of endpoints: the contract is the only source. */
export function openApiDocument(endpoints: readonly Endpoint[], build: string): OpenApiDocument {
  const schemas = schemaCollector()
  schemas.add(Problem, 'output')
  const paths: OpenApiDocument['paths'] = {}
  for (const endpoint of endpoints) {
    const path = endpoint.path.replaceAll(/:(\w+)/g, '{$1}')
    paths[path] = { ...paths[path], [endpoint.method]: operation(endpoint, schemas) }
  }
  schemas.name('LiveClientMessage', ClientMessage, 'input')
  schemas.name('LiveServerMessage', ServerMessage, 'output')
  return {
    openapi: '3.1.1',
    info: {
      title: 'Coalhand',
      version: build,
      description: apiDescription,
      license: { name: 'MIT', identifier: 'MIT' },
    },
    tags: [...new Set(endpoints.map(({ tag }) => tag))].map((name) => ({ name })),
    paths,
    components: { schemas: schemas.all(), securitySchemes },
  }
}

function operation(endpoint: Endpoint, schemas: SchemaCollector): Operation {
  const { method, path, tag, summary, access } = endpoint
  const namesVersion = endpoint.versioned === true && (method === 'put' || method === 'patch')
  const body = schemas.add(endpoint.body, 'input')
  return {
    operationId:
      method +
      path.replace(/^\/api/, '').replaceAll(/[/:-]+(\w)/g, (_, first: string) => first.toUpperCase()),
    tags: [tag],
    summary,
    ...(access.kind === 'site' && {
      description: `For these roles at the site: ${matrix[access.action].join(', ')}.`,
    }),
    ...(access.kind === 'any-site' && {
      description: `For these roles at any site: ${matrix[access.action].join(', ')}.`,
    }),
    security: securityOf(endpoint),
    parameters: [
      ...parametersOf('path', endpoint.params, schemas),
      ...parametersOf('query', endpoint.query, schemas),
      ...(namesVersion ? [ifMatch] : []),
    ],
    ...(body && { requestBody: { required: true, content: { 'application/json': { schema: body } } } }),
    responses: {
      [endpoint.status]: success(endpoint, schemas),
      ...(endpoint.unwellStatus && {
        [endpoint.unwellStatus]: {
          ...success(endpoint, schemas),
          description: 'Not well; the answer says what',
        },
      }),
      ...refusals(endpoint, namesVersion),
    },
  }
}

function securityOf({ method, path, access }: Endpoint): Operation['security'] {
  if (byRefreshCookie.has(`${method} ${path}`)) return [{ refresh: [] }]
  if (access.kind === 'public') return []
  return access.kind === 'device' ? [{ device: [] }] : [{ person: [] }]
}

const ifMatch: Parameter = {
  name: 'If-Match',
  in: 'header',
  required: true,
  description: 'The `ETag` of what you saw, such as `"3"`: a change by somebody else in between is refused.',
  schema: { type: 'string' },
}

function parametersOf(place: 'path' | 'query', schema: z.ZodType, schemas: SchemaCollector): Parameter[] {
  const { properties = {}, required = [] } = schemas.inline(schema, 'input')
  return Object.entries(properties).map(([name, property]) => ({
    name,
    in: place,
    required: place === 'path' || required.includes(name),
    schema: typeof property === 'boolean' ? {} : property,
  }))
}

function success(endpoint: Endpoint, schemas: SchemaCollector): ApiResponse {
  const schema = schemas.add(endpoint.response, 'output')
  return {
    description: endpoint.status === 201 ? 'Made' : 'Done',
    ...(endpoint.versioned && {
      headers: { ETag: { description: 'The version, for If-Match.', schema: { type: 'string' } } },
    }),
    ...(schema && { content: { 'application/json': { schema } } }),
  }
}

function refusals(endpoint: Endpoint, namesVersion: boolean): Record<string, ApiResponse> {
  const problem = (description: string): ApiResponse => ({
    description,
    content: { 'application/problem+json': { schema: { $ref: '#/components/schemas/Problem' } } },
  })
  const byAccess: Record<Access['kind'], Record<string, ApiResponse>> = {
    public: {},
    'signed-in': { 401: problem('Not signed in') },
    device: { 401: problem('No device with that user name and secret') },
    'any-site': { 401: problem('Not signed in'), 403: problem('Your roles do not allow it') },
    site: {
      401: problem('Not signed in'),
      403: problem('Your role at the site does not allow it'),
      404: problem('Not there, or you have no role at its site'),
    },
  }
  return {
    400: problem('Something sent is not in the form that is wanted; `errors` says what'),
    ...byAccess[endpoint.access.kind],
    ...(namesVersion && {
      412: problem('Somebody changed it meanwhile'),
      428: problem('If-Match is missing'),
    }),
    default: problem('Anything else that stands in the way'),
  }
}
