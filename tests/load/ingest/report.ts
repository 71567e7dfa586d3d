import type { Figures } from './figures.ts'

/** What has to hold on any machine, as each ratio's baseline was measured in the same run. */
const floors = { oneOfBare: 0.6, sixOfCopy: 0.15, p99AtThousandMs: 40 }

/** Prints the medians with their ratios. @returns the floors that were missed, in words */
export function reportIngest(figures: Figures): string[] {
  const missed: string[] = []
  const line = (title: string, ...parts: (string | undefined)[]) => {
    console.log(`${title.padEnd(36)} ${parts.filter((part) => part !== undefined).join(' · ')}`)
  }
  const rate = (name: string, unit: string) => {
    const value = figures.median(name)
    return value === undefined ? undefined : `${thousands(value)} ${unit}/s`
  }
  const ratio = (name: string, baseline: string, of: string) => {
    const value = figures.ratio(name, baseline)
    return value === undefined ? undefined : `${value.toFixed(2)} of ${of}`
  }
  const cpu = (name: string, who: string) => {
    const value = figures.median(name)
    return value === undefined ? undefined : `${who} ${value.toFixed(1)} µs of CPU a message`
  }
  const delay = (name: string, who: string) => {
    const median = figures.median(`${name} median`)
    const p99 = figures.median(`${name} p99`)
    if (median === undefined || p99 === undefined) return undefined
    return `${who}${median.toFixed(1)} ms median, ${p99.toFixed(1)} ms 99th`
  }

  line('COPY', rate('copy', 'rows'))
  line('Batched insert', rate('insert', 'rows'), ratio('insert', 'copy', 'COPY'))
  line('Bare broker', rate('bare', 'messages'), cpu('bare cpu', 'broker'))
  line(
    'Whole path, one reading a message',
    rate('one', 'messages'),
    ratio('one', 'bare', 'the bare broker'),
    cpu('one cpu', 'server'),
    cpu('one database cpu', 'PostgreSQL'),
  )
  line(
    'Whole path, six readings a message',
    rate('six', 'messages'),
    rate('six readings', 'readings'),
    ratio('six readings', 'copy', 'COPY'),
    cpu('six cpu', 'server'),
    cpu('six database cpu', 'PostgreSQL'),
  )
  line(
    'Publish to commit at 1,000/s',
    delay('whole at 1000', ''),
    delay('bare at 1000', 'bare broker, without storing: '),
  )
  line(
    'Publish to commit at 10,000/s',
    delay('whole at 10000', ''),
    delay('bare at 10000', 'bare broker, without storing: '),
  )

  const check = (value: number | undefined, holds: (value: number) => boolean, words: string) => {
    if (value !== undefined && !holds(value)) missed.push(`${words}, not ${value.toFixed(2)}`)
  }
  check(
    figures.ratio('one', 'bare'),
    (value) => value >= floors.oneOfBare,
    `messages with one reading: at least ${floors.oneOfBare} of the bare broker’s rate`,
  )
  check(
    figures.ratio('six readings', 'copy'),
    (value) => value >= floors.sixOfCopy,
    `packs of six: at least ${floors.sixOfCopy} of COPY’s rows`,
  )
  check(
    figures.median('whole at 1000 p99'),
    (value) => value < floors.p99AtThousandMs,
    `99th percentile at 1,000 messages a second: under ${floors.p99AtThousandMs} ms`,
  )
  return missed
}

function thousands(value: number): string {
  return value >= 100_000 ? `${Math.round(value / 1000)} k` : `${(value / 1000).toFixed(1)} k`
}
