import { cookerKinds } from '#shared/domain/cooking.ts'
import type { FinishedCook } from '#shared/forecast/finished-cook.ts'
import { createReachRule } from '#shared/forecast/reach-rule.ts'
import type { CookReadings } from '#shared/forecast/types.ts'
import type { TestCook } from './cook.ts'

/** A generated cook as the model takes it, without the way over a file. */
export function finishedCook(cook: TestCook): FinishedCook {
  const rows = cook.csv
    .trim()
    .split('\n')
    .slice(1)
    .map((line) => line.split(',').map((field) => (field === '' ? Number.NaN : Number(field))))
  const column = (index: number) => Float64Array.from(rows, (row) => row[index] ?? Number.NaN)
  const readings: CookReadings = { elapsedS: column(0), pitC: column(1), coreC: column(2) }
  const reach = createReachRule([cook.wrap_at_c, cook.pull_at_c])
  for (const [elapsedS = 0, , coreC = Number.NaN] of rows)
    if (coreC > -10 && coreC < 130) reach.add(elapsedS, coreC)
  return {
    facts: {
      id: cook.id,
      recipe: cook.recipe,
      cured: cook.cured,
      rawKg: cook.raw_kg,
      cookerKind: cookerKinds.find((kind) => kind === cook.cooker_kind) ?? 'offset',
      pitSetC: cook.pit_set_c,
      wrapAtC: cook.wrap_at_c,
      wrapMethod: cook.wrap_method,
      pullAtC: cook.pull_at_c,
    },
    events: cook.events.map((event) =>
      event.kind === 'wrap'
        ? { elapsedS: event.elapsed_s, kind: 'wrap' }
        : { elapsedS: event.elapsed_s, kind: 'pit_set', pitSetC: event.pit_set_c },
    ),
    readings,
    wrapReachedS: reach.reachedS[0],
    pullReachedS: reach.reachedS[1],
  }
}
