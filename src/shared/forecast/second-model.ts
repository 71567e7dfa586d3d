import { boostTrees, predictTrees, type BoostedTrees } from './boosted-trees.ts'
import type { Target } from './correction.ts'
import { fitFourierRidge, fourierPredictor, type FourierRidge } from './fourier-ridge.ts'
import { at } from './small-matrix.ts'

/** The statistical model of one target. All in the natural logarithm of the remaining time. */
export interface TargetSecondModel {
  /** Corrects the state model: ln(truth / state's median) from features and the state's answers. */
  trees: BoostedTrees
  /** Knows nothing of the state model: ln(truth) from the readings and the facts alone. */
  ridge: FourierRidge
  treeWeight: number
  ridgeWeight: number
}

export type SecondModel = Partial<Record<Target, TargetSecondModel>>

/** One moment of a past cook. */
export interface SecondRow {
  cook: number
  features: Float64Array
  answers: Float64Array
  /** The state model's median and the truth, remaining seconds. */
  stateS: number
  truthS: number
}

/** Fits both statistical models of a target; the weights are set by who calls. */
export function fitSecond(
  rows: readonly SecondRow[],
  seed: string,
): Omit<TargetSecondModel, 'treeWeight' | 'ridgeWeight'> {
  const weights = Float64Array.from(rows, ({ truthS }) => Math.min(8, 0.3 + truthS / 3600))
  const off = Float64Array.from(rows, ({ truthS, stateS }) =>
    Math.max(-1, Math.min(1, Math.log(truthS / stateS))),
  )
  const remaining = Float64Array.from(rows, ({ truthS }) => Math.log(Math.max(300, truthS)))
  const groups = rows.map(({ cook }) => cook)
  return {
    trees: boostTrees(rows.map(joined), off, weights, groups, { seed }),
    ridge: fitFourierRidge(
      rows.map(({ features }) => features),
      remaining,
      weights,
      { seed },
    ),
  }
}

export interface SecondSays {
  tree: number
  ridge: number
}

/** What both say of a moment: the trees' ln of the factor on the state's median, the ridge's ln of remaining seconds. */
export function secondPredictor(model: Omit<TargetSecondModel, 'treeWeight' | 'ridgeWeight'>) {
  const ridge = fourierPredictor(model.ridge)
  return (row: Pick<SecondRow, 'features' | 'answers'>): SecondSays => ({
    tree: predictTrees(model.trees, joined(row)),
    ridge: ridge(row.features),
  })
}

/** The blend's median, remaining seconds. */
export function blendMedian(
  stateS: number,
  says: SecondSays,
  treeWeight: number,
  ridgeWeight: number,
): number {
  const corrected = Math.log(stateS) + treeWeight * says.tree
  // Where the two disagree by more than a factor of two the ridge is out of its depth.
  const difference = Math.max(-0.7, Math.min(0.7, says.ridge - corrected))
  return Math.exp(corrected + ridgeWeight * difference)
}

/** The weights with the least mean absolute error over out-of-fold predictions, leaning towards a third of ridge. */
export function chooseWeights(
  rows: readonly SecondRow[],
  says: readonly SecondSays[],
): { treeWeight: number; ridgeWeight: number } {
  let best = { treeWeight: 0, ridgeWeight: 0, loss: Infinity }
  for (const treeWeight of [0, 0.25, 0.5, 0.75, 1]) {
    for (const ridgeWeight of [0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6]) {
      let loss = 0
      rows.forEach((row, i) => {
        const said = says[i]
        if (said) loss += Math.abs(blendMedian(row.stateS, said, treeWeight, ridgeWeight) - row.truthS)
      })
      loss *= 1 + 0.02 * (ridgeWeight - 0.33) ** 2 + 0.01 * (treeWeight - 0.5) ** 2
      if (loss < best.loss) best = { treeWeight, ridgeWeight, loss }
    }
  }
  return { treeWeight: best.treeWeight, ridgeWeight: best.ridgeWeight }
}

/** Features and answers in one row. */
function joined({ features, answers }: Pick<SecondRow, 'features' | 'answers'>): Float64Array {
  const row = new Float64Array(features.length + answers.length)
  row.set(features)
  for (let i = 0; i < answers.length; i++) row[features.length + i] = at(answers, i)
  return row
}
