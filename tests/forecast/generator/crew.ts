import type { Random } from '#shared/domain/random.ts'
import type { TestHouse } from './house.ts'

/** What this cook's crew will do: wrap late, early or never, change the set once. */
export function drawCrew(random: Random, house: TestHouse) {
  const { crew } = house
  const changes = random.uniform() < crew.setChangeShare
  const crewOf: {
    never: boolean
    earlyC: number | undefined
    delayS: number
    changeAtS: number | undefined
    changeByC: number
  } = {
    never: random.uniform() < crew.neverShare,
    earlyC: random.uniform() < crew.earlyShare ? -1 - 8 * random.uniform() : undefined,
    delayS: crew.delayMedianS * Math.exp(crew.delaySpread * random.normal()),
    changeAtS: changes ? 60 * Math.floor(120 + 480 * random.uniform()) : undefined,
    changeByC: (random.uniform() < 0.5 ? -1 : 1) * (6 + 12 * random.uniform()),
  }
  return crewOf
}
