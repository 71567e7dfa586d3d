import { isDeepStrictEqual } from 'node:util'
import { z } from 'zod'

export type JsonSchema = z.core.JSONSchema.BaseSchema

/** Whether a schema describes what may be sent or what comes back. */
export type Direction = 'input' | 'output'

/** Turns zod schemas into JSON Schema, and keeps those with a name of their own for the document's components. */
export interface SchemaCollector {
  /** The schema to write in place, a reference when it has a name; undefined when it takes nothing at all. */
  add(schema: z.ZodType, direction: Direction): JsonSchema | undefined
  /** The same, but never a reference. */
  inline(schema: z.ZodType, direction: Direction): JsonSchema
  /** Keeps a schema under a name given here. */
  name(name: string, schema: z.ZodType, direction: Direction): void
  /** Everything kept so far, by name. */
  all(): Record<string, JsonSchema>
}

/** JSON Schema 2020-12, which is what OpenAPI 3.1 takes as it is. */
export function schemaCollector(): SchemaCollector {
  const kept = new Map<string, JsonSchema>()

  const keep = (name: string, schema: JsonSchema) => {
    const before = kept.get(name)
    if (before && !isDeepStrictEqual(before, schema))
      throw new Error(`Two different schemas are called ${name}.`)
    kept.set(name, schema)
  }

  const convert = (schema: z.ZodType, direction: Direction): JsonSchema => {
    const converted = z.toJSONSchema(schema, {
      io: direction,
      unrepresentable: 'throw',
      override: ({ jsonSchema }) => simplify(jsonSchema, direction),
    })
    const { $defs = {}, ...rest } = pointAtComponents(converted)
    // The document names the dialect once for all of them.
    delete rest.$schema
    for (const [name, definition] of Object.entries($defs)) keep(name, definition)
    return rest
  }

  return {
    add: (schema, direction) => (takesNothing(schema) ? undefined : convert(schema, direction)),
    inline: convert,
    name: (name, schema, direction) => keep(name, convert(schema, direction)),
    all: () => Object.fromEntries([...kept].sort(([one], [other]) => (one < other ? -1 : 1))),
  }
}

/** What JSON cannot say: no body at all. */
function takesNothing(schema: z.ZodType): boolean {
  return schema instanceof z.ZodUndefined
}

function simplify(schema: JsonSchema, direction: Direction): void {
  // The format says it; the expression behind it fills a page.
  if (schema.format !== undefined) delete schema.pattern
  // An answer may get a new field one day: a client that refuses it would break for nothing.
  if (direction === 'output' && schema.additionalProperties === false) delete schema.additionalProperties
}

/** Zod puts named schemas beside the one that was asked for; in the document they stand under the components. */
function pointAtComponents(schema: JsonSchema): JsonSchema {
  const text = JSON.stringify(schema).replaceAll('"$ref":"#/$defs/', '"$ref":"#/components/schemas/')
  return AnySchema.parse(JSON.parse(text))
}

const AnySchema = z.custom<JsonSchema>((value) => typeof value === 'object' && value !== null)
