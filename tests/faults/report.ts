/** What a scenario finds out, printed as it goes. */
export interface Report {
  /** Prints a measured figure. */
  figure: (what: string, value: string | number) => void
  /** Prints a claim and whether it holds. */
  check: (claim: string, holds: boolean, seen?: string) => void
  counts: () => { passed: number; failed: string[] }
}

export interface Scenario {
  name: string
  title: string
  run: (report: Report, seed: string) => Promise<void>
}

export function createReport(scenario: string, print: (line: string) => void): Report {
  let passed = 0
  const failed: string[] = []
  return {
    figure: (what, value) => print(`    ${what}: ${value}`),
    check: (claim, holds, seen) => {
      if (holds) passed++
      else failed.push(`${scenario}: ${claim}${seen === undefined ? '' : ` (${seen})`}`)
      print(`  ${holds ? 'ok  ' : 'FAIL'} ${claim}${seen === undefined ? '' : `: ${seen}`}`)
    },
    counts: () => ({ passed, failed }),
  }
}

/** Milliseconds in words: `12 ms`, `3.4 s`. */
export function duration(ms: number): string {
  return ms < 1000 ? `${ms < 20 ? ms.toFixed(1) : Math.round(ms)} ms` : `${(ms / 1000).toFixed(1)} s`
}

export function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b)
  return sorted[Math.floor(sorted.length / 2)] ?? NaN
}

export function spread(milliseconds: readonly number[]): string {
  return `median ${duration(median(milliseconds))}, longest ${duration(Math.max(...milliseconds))}`
}
