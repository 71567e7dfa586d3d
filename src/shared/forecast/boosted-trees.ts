import { seededRandom } from '../domain/random.ts'
import { at } from './small-matrix.ts'

/** A tree of depth d as arrays: 2^d − 1 splits by level, 2^d leaves. */
export interface FlatTree {
  feature: number[]
  border: number[]
  leaf: number[]
}

export interface BoostedTrees {
  depth: number
  trees: FlatTree[]
}

export interface BoostingOptions {
  depth?: number
  trees?: number
  rate?: number
  /** Ridge on a leaf's value, in units of row weight. */
  leafRidge?: number
  seed: string
}

const binCount = 24

/**
 * Gradient boosting of small regression trees on the squared loss, with rows drawn by group (whole cooks) for each
 * tree. Friedman 2001 and 2002 (from memory). Features are cut at quantiles once; trees are symmetric in depth, not
 * in their splits.
 */
export function boostTrees(
  rows: readonly Float64Array[],
  goals: Float64Array,
  weights: Float64Array,
  groups: readonly number[],
  { depth = 3, trees = 120, rate = 0.06, leafRidge = 0.02, seed }: BoostingOptions,
): BoostedTrees {
  const random = seededRandom('boosting', seed)
  const count = rows.length
  const width = rows[0]?.length ?? 0
  const borders = Array.from({ length: width }, (_, f) => quantileBorders(rows, f))
  const binned = borders.map((cuts, f) => Uint8Array.from(rows, (row) => binOf(cuts, at(row, f))))
  const rest = goals.slice()
  const totalWeight = weights.reduce((sum, weight) => sum + weight, 0)
  const ridge = leafRidge * totalWeight
  const groupCount = groups.reduce((most, group) => Math.max(most, group + 1), 0)
  const node = new Uint8Array(count)
  const built: FlatTree[] = []
  for (let round = 0; round < trees; round++) {
    const chosen = Array.from({ length: groupCount }, () => random.uniform() < 0.7)
    const used = groups.map((group) => chosen[group] === true)
    const tree: FlatTree = { feature: [], border: [], leaf: [] }
    node.fill(0)
    for (let level = 0; level < depth; level++) {
      const nodes = 1 << level
      const allowed = Array.from({ length: width }, () => random.uniform() < 0.6)
      const splits = bestSplits(binned, borders, allowed, node, nodes, used, rest, weights, ridge)
      for (const split of splits) {
        tree.feature.push(split.feature)
        tree.border.push(split.border)
      }
      for (let i = 0; i < count; i++) {
        const split = splits[at(node, i)]
        const right = split && split.bin >= 0 && at(binned[split.feature] ?? node, i) > split.bin ? 1 : 0
        node[i] = at(node, i) * 2 + right
      }
    }
    const sums = new Float64Array(1 << depth)
    const masses = new Float64Array(1 << depth)
    for (let i = 0; i < count; i++) {
      if (!used[i]) continue
      const n = at(node, i)
      sums[n] = at(sums, n) + at(weights, i) * at(rest, i)
      masses[n] = at(masses, n) + at(weights, i)
    }
    tree.leaf = Array.from(sums, (sum, n) => (rate * sum) / (at(masses, n) + ridge))
    for (let i = 0; i < count; i++) rest[i] = at(rest, i) - at(tree.leaf, at(node, i))
    built.push(tree)
  }
  return { depth, trees: built }
}

/** The trees' sum for one row. */
export function predictTrees({ depth, trees }: BoostedTrees, row: Float64Array): number {
  let sum = 0
  for (const { feature, border, leaf } of trees) {
    let place = 0
    for (let level = 0; level < depth; level++) {
      const split = (1 << level) - 1 + place
      place = place * 2 + (at(row, at(feature, split)) > at(border, split) ? 1 : 0)
    }
    sum += at(leaf, place)
  }
  return sum
}

function quantileBorders(rows: readonly Float64Array[], feature: number): number[] {
  const sorted = Float64Array.from(rows, (row) => at(row, feature)).sort()
  const cuts: number[] = []
  for (let b = 1; b < binCount; b++) {
    const cut = at(sorted, Math.floor((b * sorted.length) / binCount))
    if (cuts.length === 0 || cut > (cuts[cuts.length - 1] ?? cut)) cuts.push(cut)
  }
  return cuts
}

/** The number of cuts that the value exceeds. */
function binOf(cuts: readonly number[], value: number): number {
  let bin = 0
  while (bin < cuts.length && value > (cuts[bin] ?? Infinity)) bin++
  return bin
}

interface Split {
  feature: number
  bin: number
  border: number
}

function bestSplits(
  binned: readonly Uint8Array[],
  borders: readonly number[][],
  allowed: readonly boolean[],
  node: Uint8Array,
  nodes: number,
  used: readonly boolean[],
  rest: Float64Array,
  weights: Float64Array,
  ridge: number,
): Split[] {
  const best = Array.from({ length: nodes }, () => ({ gain: 1e-12, feature: 0, bin: -1, border: Infinity }))
  binned.forEach((bins, feature) => {
    if (!allowed[feature]) return
    const sums = new Float64Array(nodes * binCount)
    const masses = new Float64Array(nodes * binCount)
    for (let i = 0; i < bins.length; i++) {
      if (!used[i]) continue
      const cell = at(node, i) * binCount + at(bins, i)
      sums[cell] = at(sums, cell) + at(weights, i) * at(rest, i)
      masses[cell] = at(masses, cell) + at(weights, i)
    }
    for (let n = 0; n < nodes; n++) {
      let sum = 0
      let mass = 0
      for (let b = 0; b < binCount; b++) {
        sum += at(sums, n * binCount + b)
        mass += at(masses, n * binCount + b)
      }
      const whole = (sum * sum) / (mass + ridge)
      let leftSum = 0
      let leftMass = 0
      const cuts = borders[feature] ?? []
      for (let b = 0; b < cuts.length; b++) {
        leftSum += at(sums, n * binCount + b)
        leftMass += at(masses, n * binCount + b)
        const gain =
          (leftSum * leftSum) / (leftMass + ridge) +
          ((sum - leftSum) * (sum - leftSum)) / (mass - leftMass + ridge) -
          whole
        const champion = best[n]
        if (champion && gain > champion.gain) best[n] = { gain, feature, bin: b, border: cuts[b] ?? Infinity }
      }
    }
  })
  return best
}
