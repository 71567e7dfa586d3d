/** The labels of a SenML record that are read here (RFC 8428, section 4); others may stand beside them. */
export interface SenmlFields {
  bver?: number | undefined
  bn?: string | undefined
  bt?: number | undefined
  bu?: string | undefined
  bv?: number | undefined
  n?: string | undefined
  u?: string | undefined
  v?: number | undefined
  vs?: string | undefined
  vb?: boolean | undefined
  vd?: string | undefined
  s?: number | undefined
  t?: number | undefined
  ut?: number | undefined
  [label: string]: unknown
}

/** A record that stands for itself: base fields applied, time absolute. */
export interface ResolvedRecord {
  name: string
  unit: string | undefined
  value: number
  /** Milliseconds since 1970 UTC; undefined when neither the record nor its base gave a time. */
  timeMs: number | undefined
}

/** A record that cannot be taken; `index` is its place in the pack. */
export interface RefusedRecord {
  index: number
  reason: 'not-senml' | 'not-a-number' | 'unsupported-field'
  /** In words, with what was wrong. */
  detail: string
}

/** The version of SenML that is understood; RFC 8428 defines 10, and says how to read the lower ones. */
const understoodVersion = 10

/** Times below this are relative to now (RFC 8428, section 4.5.3), in seconds. */
const relativeBelow = 2 ** 28

const regularLabels = ['n', 'u', 'v', 'vs', 'vb', 'vd', 's', 't', 'ut'] as const

/**
 * Resolves a pack (RFC 8428, section 4.6): base name in front, base time and base value added, base unit where there
 * is none, times below 2^28 s counted from `nowSeconds`. Records that hold only base fields give nothing. A pack of a
 * later version, or with a label that ends in `_` (must be understood, section 4.4), is refused as a whole.
 *
 * @param records as sent, in order
 * @param nowSeconds the present in seconds since 1970 UTC
 */
export function resolvePack(
  records: readonly SenmlFields[],
  nowSeconds: number,
): { records: ResolvedRecord[]; refused: RefusedRecord[] } {
  const obstacle = findObstacle(records)
  if (obstacle) return { records: [], refused: [obstacle] }

  const resolved: ResolvedRecord[] = []
  const refused: RefusedRecord[] = []
  let baseName = ''
  let baseTime: number | undefined
  let baseUnit: string | undefined
  let baseValue: number | undefined

  for (const [index, record] of records.entries()) {
    baseName = record.bn ?? baseName
    baseTime = record.bt ?? baseTime
    baseUnit = record.bu ?? baseUnit
    baseValue = record.bv ?? baseValue
    if (holdsOnlyBase(record)) continue

    const name = baseName + (record.n ?? '')
    if (!isName(name)) {
      refused.push({ index, reason: 'not-senml', detail: `the name “${name}” is not allowed` })
      continue
    }
    if (record.v === undefined) {
      refused.push({ index, reason: 'not-a-number', detail: `“${name}” carries ${kindOfValue(record)}` })
      continue
    }
    const seconds =
      record.t === undefined && baseTime === undefined ? undefined : (baseTime ?? 0) + (record.t ?? 0)
    resolved.push({
      name,
      unit: record.u ?? baseUnit,
      value: record.v + (baseValue ?? 0),
      timeMs: seconds === undefined ? undefined : millisecondsOf(seconds, nowSeconds),
    })
  }
  return { records: resolved, refused }
}

/** What makes the whole pack unreadable, if anything. */
function findObstacle(records: readonly SenmlFields[]): RefusedRecord | undefined {
  for (const [index, record] of records.entries()) {
    if (record.bver !== undefined && record.bver > understoodVersion) {
      return {
        index,
        reason: 'unsupported-field',
        detail: `version ${record.bver} of SenML (bver) is not understood`,
      }
    }
    for (const label in record) {
      if (label.endsWith('_')) {
        return {
          index,
          reason: 'unsupported-field',
          detail: `the field “${label}” must be understood and is not`,
        }
      }
    }
  }
  return undefined
}

function holdsOnlyBase(record: SenmlFields): boolean {
  return regularLabels.every((label) => record[label] === undefined)
}

/** Section 4.5.1: letters, digits and `-:./_`, not beginning with punctuation. */
function isName(name: string): boolean {
  return /^[A-Za-z0-9][A-Za-z0-9\-:./_]*$/.test(name)
}

function kindOfValue(record: SenmlFields): string {
  if (record.vs !== undefined) return 'a text instead of a number'
  if (record.vb !== undefined) return 'a yes or no instead of a number'
  if (record.vd !== undefined) return 'data instead of a number'
  return 'no value'
}

function millisecondsOf(seconds: number, nowSeconds: number): number {
  return Math.round((seconds < relativeBelow ? nowSeconds + seconds : seconds) * 1000)
}
