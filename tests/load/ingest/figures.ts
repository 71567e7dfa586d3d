/** What was measured, by name, in each round. */
export interface Figures {
  note: (name: string, value: number) => void
  /** The median over the rounds; undefined when it was not measured. */
  median: (name: string) => number | undefined
  /**
   * The median of one figure's ratio to another of the same round: what disturbs the machine for a while disturbs both,
   * and leaves the ratio.
   */
  ratio: (name: string, baseline: string) => number | undefined
}

export function createFigures(): Figures {
  const values = new Map<string, number[]>()
  return {
    note: (name, value) => values.set(name, [...(values.get(name) ?? []), value]),
    median: (name) => medianOf(values.get(name) ?? []),
    ratio: (name, baseline) => {
      const baselines = values.get(baseline) ?? []
      return medianOf(
        (values.get(name) ?? []).flatMap((value, round) => {
          const other = baselines[round]
          return other === undefined ? [] : [value / other]
        }),
      )
    },
  }
}

function medianOf(values: readonly number[]): number | undefined {
  const sorted = [...values].sort((a, b) => a - b)
  const low = sorted[Math.floor((sorted.length - 1) / 2)]
  const high = sorted[Math.ceil((sorted.length - 1) / 2)]
  return low === undefined || high === undefined ? undefined : (low + high) / 2
}
