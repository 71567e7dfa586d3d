import type { WrapMethod } from '#shared/domain/cooking.ts'
import type { Random } from '#shared/domain/random.ts'
import { pieceLaws, type PieceLaw, type PitHabit, type TestHouse } from './house.ts'
import { drawPiece } from './piece.ts'
import { drawPit } from './pit.ts'

/** A piece in a pit. */
export interface TestKitchen {
  /** A minute later: what is true of the pit and of the meat at the probe's place, °C. */
  minute(setC: number): { pitC: number; coreC: number }
  wrap(method: WrapMethod): void
}

export interface KitchenOrder {
  rawKg: number
  cured: boolean
  habit: PitHabit
  setC: number
}

export type DrawKitchen = (random: Random, house: TestHouse, order: KitchenOrder) => TestKitchen

/** A kitchen of this generator's own physics. */
export const drawKitchen: DrawKitchen = (random, house, { rawKg, cured, habit, setC }) => {
  const piece = drawPiece(random, house, drawLaw(random, house), rawKg, cured)
  const pit = drawPit(random, habit, setC)
  return {
    minute: (set) => {
      const pitC = pit.minute(set)
      piece.step(60, pitC)
      return { pitC, coreC: piece.probeC() }
    },
    wrap: (method) => {
      piece.wrap(method)
      pit.openDoor()
    },
  }
}

function drawLaw(random: Random, house: TestHouse): PieceLaw {
  const whole = pieceLaws.reduce((sum, law) => sum + house.lawShares[law], 0)
  let left = random.uniform() * whole
  for (const law of pieceLaws) {
    left -= house.lawShares[law]
    if (left <= 0) return law
  }
  return 'vapour'
}
