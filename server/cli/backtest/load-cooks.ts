import { readFileSync } from 'node:fs'
import { join } from 'node:path'
import { CsvError, parse } from 'csv-parse/sync'
import { z } from 'zod'
import { wrapMethods } from '#shared/domain/cooking.ts'
import type { FinishedCook } from '#shared/forecast/finished-cook.ts'
import { createReachRule } from '#shared/forecast/reach-rule.ts'
import type { CookEvent, CookReadings } from '#shared/forecast/types.ts'

export interface LoadedCooks {
  cooks: FinishedCook[]
  /** One line a broken file: its name, the line and what is wrong. */
  faults: string[]
}

const eventSchema = z.discriminatedUnion('kind', [
  z.object({
    elapsed_s: z.number().nonnegative(),
    kind: z.literal('wrap'),
    method: z.enum(wrapMethods).optional(),
  }),
  z.object({ elapsed_s: z.number().nonnegative(), kind: z.literal('pit_set'), pit_set_c: z.number() }),
])

const cookSchema = z.object({
  id: z.string().regex(/^[\w.-]+$/, 'may hold letters, digits, dot, dash and underscore only'),
  recipe: z.string(),
  cured: z.boolean(),
  raw_kg: z.number().positive(),
  cooker_kind: z.enum(['offset', 'cabinet', 'rotisserie']),
  pit_set_c: z.number(),
  wrap_at_c: z.number(),
  wrap_method: z.enum(wrapMethods),
  pull_at_c: z.number(),
  events: z.array(eventSchema),
})

/** Reads a folder of finished cooks. A broken entry or file is told and left out. @throws where cooks.json itself cannot be read. */
export function loadCooks(folder: string): LoadedCooks {
  const listPath = join(folder, 'cooks.json')
  const text = readFileSync(listPath, 'utf8')
  const entries = z.array(z.unknown()).parse(JSON.parse(text))
  const cooks: FinishedCook[] = []
  const faults: string[] = []
  entries.forEach((entry, index) => {
    const parsed = cookSchema.safeParse(entry)
    if (!parsed.success) {
      const issue = parsed.error.issues[0]
      const place = `${listPath}:${lineOfEntry(text, index)}`
      faults.push(
        `${place}: cook ${index + 1}: ${issue?.path.join('.') ?? ''} ${issue?.message ?? 'is not a cook'}`,
      )
      return
    }
    const path = join(folder, `${parsed.data.id}.csv`)
    const readings = loadReadings(path)
    if (typeof readings === 'string') faults.push(readings)
    else cooks.push(finished(parsed.data, readings))
  })
  return { cooks, faults }
}

function finished(cook: z.infer<typeof cookSchema>, readings: CookReadings): FinishedCook {
  const reach = createReachRule([cook.wrap_at_c, cook.pull_at_c])
  for (let i = 0; i < readings.elapsedS.length; i++) {
    const coreC = readings.coreC[i] ?? Number.NaN
    if (coreC > -10 && coreC < 130) reach.add(readings.elapsedS[i] ?? Number.NaN, coreC)
  }
  return {
    facts: {
      id: cook.id,
      recipe: cook.recipe,
      cured: cook.cured,
      rawKg: cook.raw_kg,
      cookerKind: cook.cooker_kind,
      pitSetC: cook.pit_set_c,
      wrapAtC: cook.wrap_at_c,
      wrapMethod: cook.wrap_method,
      pullAtC: cook.pull_at_c,
    },
    events: cook.events
      .map((event): CookEvent =>
        event.kind === 'wrap'
          ? { elapsedS: event.elapsed_s, kind: 'wrap', ...(event.method ? { method: event.method } : {}) }
          : { elapsedS: event.elapsed_s, kind: 'pit_set', pitSetC: event.pit_set_c },
      )
      .sort((a, b) => a.elapsedS - b.elapsedS),
    readings,
    wrapReachedS: reach.reachedS[0],
    pullReachedS: reach.reachedS[1],
  }
}

/** A line of the file as its parser gives it. */
const Rows = z.array(z.object({ record: z.array(z.string()), info: z.object({ lines: z.number() }) }))
type Row = z.infer<typeof Rows>[number]

/** The readings, or what is wrong with the file and on which line. */
function loadReadings(path: string): CookReadings | string {
  let text: string
  try {
    text = readFileSync(path, 'utf8')
  } catch {
    return `${path}:1: the file cannot be read`
  }
  let rows: Row[]
  try {
    rows = Rows.parse(
      parse(text, { info: true, trim: true, relax_column_count: true, skip_empty_lines: true }),
    )
  } catch (error) {
    return `${path}:${error instanceof CsvError ? String(error['lines']) : '1'}: this is not CSV`
  }
  const [header, ...readings] = rows
  if (header?.record.join() !== 'elapsed_s,pit_c,core_c')
    return `${path}:1: the header is not elapsed_s,pit_c,core_c`
  const elapsedS: number[] = []
  const pitC: number[] = []
  const coreC: number[] = []
  for (const { record, info } of readings) {
    if (record.length !== 3) return `${path}:${info.lines}: ${record.length} fields instead of 3`
    const numbers = record.map((field) => (field === '' ? Number.NaN : Number(field)))
    const broken = record.findIndex((field, k) => field !== '' && !Number.isFinite(numbers[k]))
    if (broken >= 0) return `${path}:${info.lines}: ${JSON.stringify(record[broken])} is not a number`
    const [time = Number.NaN, pit = Number.NaN, core = Number.NaN] = numbers
    if (Number.isNaN(time)) return `${path}:${info.lines}: elapsed_s is empty`
    elapsedS.push(time)
    pitC.push(pit)
    coreC.push(core)
  }
  if (elapsedS.length === 0) return `${path}:2: no readings`
  return inOrder(elapsedS, pitC, coreC)
}

/** Late rows are put where they belong; the sort is stable, so that of two rows of one time the first comes first. */
function inOrder(elapsedS: number[], pitC: number[], coreC: number[]): CookReadings {
  const order = elapsedS.map((_, i) => i).sort((a, b) => (elapsedS[a] ?? 0) - (elapsedS[b] ?? 0))
  const sorted = (values: number[]) => Float64Array.from(order, (i) => values[i] ?? Number.NaN)
  return { elapsedS: sorted(elapsedS), pitC: sorted(pitC), coreC: sorted(coreC) }
}

/** The line on which the n-th element of a JSON array starts, found by its depth. */
function lineOfEntry(text: string, index: number): number {
  let depth = 0
  let line = 1
  let seen = -1
  let quoted = false
  for (let i = 0; i < text.length; i++) {
    const c = text[i]
    if (c === '\n') line++
    if (quoted) {
      if (c === '\\') i++
      else if (c === '"') quoted = false
      continue
    }
    if (c === '"') quoted = true
    if (c === '{' || c === '[') {
      if (depth === 1 && ++seen === index) return line
      depth++
    } else if (c === '}' || c === ']') depth--
  }
  return line
}
