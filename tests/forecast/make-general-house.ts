import { writeFileSync } from 'node:fs'
import { seededRandom } from '#shared/domain/random.ts'
import { readyHouse } from '#shared/forecast/answer.ts'
import {
  learnCorrection,
  plainCorrection,
  targets,
  type PastForecast,
  type Target,
} from '#shared/forecast/correction.ts'
import { firstPrior } from '#shared/forecast/first-prior.ts'
import type { HouseModel } from '#shared/forecast/house-model.ts'
import { learnCrew, learnPits } from '#shared/forecast/learn-habits.ts'
import { learnPriors } from '#shared/forecast/learn-prior.ts'
import { prepareCook } from '#shared/forecast/prepare-cook.ts'
import { replayCook } from '#shared/forecast/replay.ts'
import { at } from '#shared/forecast/small-matrix.ts'
import { drawCook } from './generator/cook.ts'
import { finishedCook } from './generator/finished-cook.ts'
import { drawKitchen } from './generator/kitchen.ts'
import { drawSimulatorKitchen } from './generator/simulator-kitchen.ts'
import { drawHouse } from './generator/house.ts'

/**
 * Makes the general model that ships with the product, src/shared/forecast/general-house.ts, from the test generator:
 * ten cooks of each of the houses with seeds 101 to 160, no two alike, the last fifteen with the simulator's physics.
 * `node --import tsx tests/forecast/make-general-house.ts`
 */
const seeds = Array.from({ length: 60 }, (_, i) => 101 + i)
const cooksAHouse = 10

const finished = seeds
  .flatMap((seed) => {
    const house = drawHouse(seededRandom('house', seed))
    return Array.from({ length: cooksAHouse }, (_, i) =>
      finishedCook(drawCook(house, seed, i + 1, seed > 145 ? drawSimulatorKitchen : drawKitchen)),
    )
  })
  .filter((cook) => cook.pullReachedS !== undefined)
const learned = finished.map(({ facts, readings, events, pullReachedS }) => ({
  facts,
  cook: prepareCook(facts, readings, events, pullReachedS ?? 0),
}))
const firstPits: HouseModel['pits'] = {
  offset: { biasC: 0, sdC: 6, tauS: 4000 },
  cabinet: { biasC: 0, sdC: 2, tauS: 3000 },
  rotisserie: { biasC: 0, sdC: 3.5, tauS: 3600 },
  kettle: { biasC: 0, sdC: 6, tauS: 4000 },
  holding: { biasC: 0, sdC: 1.5, tauS: 3000 },
}
const crew = learnCrew(finished, { earlyC: [], delaysS: [], never: 0 })
const house: HouseModel = {
  version: 1,
  cooks: 0,
  laws: learnPriors(
    learned,
    { juice: firstPrior('juice'), vapour: firstPrior('vapour') },
    { rounds: 8, constantWorth: 1, slopeWorth: 3, covarianceWorth: 4 },
  ),
  pits: learnPits(learned, firstPits),
  crew: {
    earlyC: thin(crew.earlyC, 4),
    delaysS: thin(crew.delaysS, 14),
    never: (18 * crew.never) / finished.length,
  },
  correction: plainCorrection(),
}
const ready = readyHouse(house)
const past: Record<Target, PastForecast[]> = { wrap: [], pull: [] }
finished.forEach((cook, index) => {
  const rows = replayCook(cook, index, ready, 2400)
  for (const target of targets) {
    past[target].push(
      ...rows[target].map((row) => ({
        cook: String(index),
        coreC: at(row.features, 0),
        times: row.times,
        truthS: row.truthS,
      })),
    )
  }
})
house.correction = learnCorrection(past, plainCorrection())

const text = JSON.stringify(
  house,
  (_, value: unknown) => (typeof value === 'number' ? Number(value.toPrecision(4)) : value),
  2,
)
writeFileSync(
  'src/shared/forecast/general-house.ts',
  `import type { HouseModel } from './house-model.ts'

/**
 * The general model that ships with the product: what a new house starts from. Made by
 * tests/forecast/make-general-house.ts from ${finished.length} generated cooks of houses ${seeds[0] ?? 0} to ${seeds[seeds.length - 1] ?? 0}; do not edit.
 */
export const generalHouse: HouseModel = ${text}
`,
)

function thin(values: number[], keep: number): number[] {
  const sorted = values.slice().sort((a, b) => a - b)
  return Array.from({ length: keep }, (_, i) => at(sorted, Math.floor(((i + 0.5) * sorted.length) / keep)))
}
