import type { CookerKind, WrapMethod } from '#shared/domain/cooking.ts'
import type { Random } from '#shared/domain/random.ts'

/** Which physics a piece of this house follows. */
export const pieceLaws = ['vapour', 'juice', 'front'] as const
export type PieceLaw = (typeof pieceLaws)[number]

export interface TestRecipe {
  name: string
  cured: boolean
  kgMean: number
  pitSetsC: number[]
  wrapAtC: number
  wrapMethods: WrapMethod[]
  pullAtC: number
}

export interface PitHabit {
  kind: CookerKind
  /** Mean and spread of a fire's lasting distance from its set, K. */
  biasC: number
  biasSdC: number
  wanderSdC: number
  wanderTauS: number
  /** Mean number an hour. */
  dipsPerHour: number
  doorsPerHour: number
}

export interface CrewHabit {
  delayMedianS: number
  delaySpread: number
  earlyShare: number
  neverShare: number
  setChangeShare: number
}

export interface TestHouse {
  lawShares: Record<PieceLaw, number>
  recipes: TestRecipe[]
  pits: PitHabit[]
  crew: CrewHabit
  /** House-wide factors on what a piece is: its thickness, heat transfer, water, sink. */
  thickness: number
  transfer: number
  water: number
  sink: number
  humidityPa: number
  /** How much pieces of one kind differ, 1 for the usual. */
  variety: number
  faultShare: number
}

/** A house as the generator imagines it: far more various than one believes in. */
export function drawHouse(random: Random, lawShares?: Record<PieceLaw, number>): TestHouse {
  const between = (low: number, high: number) => low + (high - low) * random.uniform()
  const spread = (sd: number) => Math.exp(sd * random.normal())
  const shares = lawShares ?? {
    vapour: random.uniform(),
    juice: random.uniform(),
    front: 0.35 * random.uniform(),
  }
  const wraps: WrapMethod[][] = [
    ['paper', 'paper', 'paper', 'foil'],
    ['foil', 'none'],
    ['paper', 'foil', 'boat', 'none'],
    ['paper'],
  ]
  const wrapsOf = () => wraps[Math.floor(random.uniform() * wraps.length)] ?? ['paper']
  const low = between(104, 110)
  const middle = between(118, 124)
  const high = between(131, 138)
  return {
    lawShares: shares,
    recipes: [
      {
        name: 'house-brisket',
        cured: false,
        kgMean: between(5, 7.5),
        pitSetsC: [middle, middle, high],
        wrapAtC: between(71, 77),
        wrapMethods: wrapsOf(),
        pullAtC: between(93, 97),
      },
      {
        name: 'low-brisket',
        cured: false,
        kgMean: between(4.5, 7),
        pitSetsC: [low, low, middle],
        wrapAtC: between(68, 75),
        wrapMethods: wrapsOf(),
        pullAtC: between(91, 95),
      },
      {
        name: 'pastrami',
        cured: true,
        kgMean: between(4, 6.5),
        pitSetsC: [middle, high],
        wrapAtC: between(70, 76),
        wrapMethods: wrapsOf(),
        pullAtC: between(91, 96),
      },
    ],
    pits: [
      {
        kind: 'offset',
        biasC: between(-3, 4),
        biasSdC: between(1.5, 4),
        wanderSdC: between(4, 8),
        wanderTauS: between(1800, 6000),
        dipsPerHour: between(0.05, 0.2),
        doorsPerHour: between(0.2, 0.6),
      },
      {
        kind: 'cabinet',
        biasC: between(-1, 1),
        biasSdC: between(0.5, 1.5),
        wanderSdC: between(1, 2.5),
        wanderTauS: between(900, 3600),
        dipsPerHour: 0.01,
        doorsPerHour: between(0.1, 0.3),
      },
      {
        kind: 'rotisserie',
        biasC: between(-2, 2),
        biasSdC: between(1, 3),
        wanderSdC: between(2, 5),
        wanderTauS: between(1200, 5400),
        dipsPerHour: between(0.02, 0.08),
        doorsPerHour: between(0.2, 0.5),
      },
    ],
    crew: {
      delayMedianS: between(300, 1800),
      delaySpread: between(0.3, 0.9),
      earlyShare: between(0, 0.35),
      neverShare: between(0.01, 0.15),
      setChangeShare: between(0.05, 0.3),
    },
    thickness: spread(0.08),
    transfer: spread(0.12),
    water: spread(0.2),
    sink: spread(0.12),
    humidityPa: between(1500, 7000),
    variety: between(0.7, 1.3),
    faultShare: between(0, 0.12),
  }
}
